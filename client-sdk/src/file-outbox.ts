import { createHash } from 'node:crypto';
import { type FileHandle, mkdir, open, readFile, rename } from 'node:fs/promises';
import path from 'node:path';
import { lockFolder } from '../../server/platform/folder-lock.ts';
import type { OutboxItem, OutboxStorage } from './outbox-storage.ts';

/** One line of the file: an item added or replaced, or the number of one that is done with. */
type Line = { readonly put: OutboxItem } | { readonly remove: number };

/** The outbox file holds a line that was damaged after it had been written. */
export class OutboxDamagedError extends Error {
  override readonly name = 'OutboxDamagedError';
}

/** Sixteen hex digits of SHA-256: an accident goes unnoticed once in 10^19. */
const CHECKSUM_LENGTH = 16;

const FILE_NAME = 'outbox.log';

/**
 * Keeps an outbox in a folder: an append-only file of lines, each with a checksum and each on the
 * disk (fsync) before `put` or `remove` resolve. The folder is held while the storage is open.
 *
 * A last line that was torn by a crash was never acknowledged; it is cut off. A damaged line
 * anywhere else is reported, never skipped. Lines that are done with are dropped when the file is
 * opened.
 *
 * @throws {FolderLockedError} when a live process has the folder open
 * @throws {OutboxDamagedError} naming the line
 */
export async function openFileOutbox(folder: string): Promise<OutboxStorage> {
  await mkdir(folder, { recursive: true, mode: 0o700 });
  const unlock = lockFolder(folder);
  try {
    const file = path.join(folder, FILE_NAME);
    const items = itemsIn(await readOrEmpty(file), file);
    await replaceFile(file, [...items.values()].map((item) => lineText({ put: item })).join(''));
    return appendingStorage(await open(file, 'a'), items, unlock);
  } catch (error) {
    unlock();
    throw error;
  }
}

function appendingStorage(
  file: FileHandle,
  items: ReadonlyMap<number, OutboxItem>,
  unlock: () => void,
): OutboxStorage {
  const append = async (line: Line): Promise<void> => {
    const { size } = await file.stat();
    try {
      await file.appendFile(lineText(line));
      await file.sync();
    } catch (error) {
      // Half a line in the middle of the file would make the rest unreadable.
      await file.truncate(size);
      throw error;
    }
  };
  return {
    load: async () => [...items.values()],
    put: (item) => append({ put: item }),
    remove: (number) => append({ remove: number }),
    close: async () => {
      await file.close();
      unlock();
    },
  };
}

/** The items that a file's lines leave, by number. */
function itemsIn(text: string, file: string): Map<number, OutboxItem> {
  const items = new Map<number, OutboxItem>();
  const lines = text.split('\n');
  for (const [index, lineText] of lines.entries()) {
    const isLast = index === lines.length - 1;
    if (isLast && lineText === '') continue;
    const line = parsedLine(lineText);
    // What follows the last end of line was being written when the station stopped.
    if (line === null && isLast) continue;
    if (line === null) {
      throw new OutboxDamagedError(`Line ${index + 1} of ${file} does not match its checksum.`);
    }
    if ('put' in line) items.set(line.put.number, line.put);
    else items.delete(line.remove);
  }
  return items;
}

function lineText(line: Line): string {
  const text = JSON.stringify(line);
  return `${checksum(text)} ${text}\n`;
}

function parsedLine(text: string): Line | null {
  const content = text.slice(CHECKSUM_LENGTH + 1);
  return text === `${checksum(content)} ${content}` ? JSON.parse(content) : null;
}

function checksum(text: string): string {
  return createHash('sha256').update(text).digest('hex').slice(0, CHECKSUM_LENGTH);
}

async function readOrEmpty(file: string): Promise<string> {
  try {
    return await readFile(file, 'utf8');
  } catch (error) {
    if (error instanceof Error && 'code' in error && error.code === 'ENOENT') return '';
    throw error;
  }
}

/** Replaces a file in one step: whoever reads it later finds the old text or the new one, whole. */
export async function replaceFile(file: string, text: string): Promise<void> {
  const draft = `${file}.draft`;
  const handle = await open(draft, 'w', 0o600);
  try {
    await handle.writeFile(text);
    await handle.sync();
  } finally {
    await handle.close();
  }
  await rename(draft, file);
  await syncFolder(path.dirname(file));
}

/** Puts a folder's own entries on the disk, where the system lets a folder be opened. */
async function syncFolder(folder: string): Promise<void> {
  if (process.platform === 'win32') return;
  const handle = await open(folder, 'r');
  try {
    await handle.sync();
  } finally {
    await handle.close();
  }
}
