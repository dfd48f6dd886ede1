import { spawnSync } from 'node:child_process';
import { linkSync, mkdirSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { hostname } from 'node:os';
import { join } from 'node:path';

/** Thrown when another live process holds the folder, or may hold it. */
export class FolderLockedError extends Error {
  override readonly name = 'FolderLockedError';
}

interface Holder {
  readonly pid: number;
  readonly birth: string;
  readonly host: string;
}

const LOCK_NAME = /^lock\.(\d+)$/;

/** Takers that meet at one moment each go round once for every other; more is a fault. */
const TRIES_MAX = 100;

/**
 * Holds a folder for this process until the returned function is called or the process dies.
 *
 * The holder is the file `lock.N` with the highest N: process id, its birth (a reused id has
 * another) and host. A dead holder is succeeded by creating `lock.N+1`, which only one
 * process can: removing the dead one's file first would let two takers remove each other's.
 *
 * @throws {FolderLockedError} naming the folder and the holder's process id
 */
export function lockFolder(folder: string): () => void {
  mkdirSync(folder, { recursive: true });
  const own: Holder = {
    pid: process.pid,
    birth: processBirth(process.pid) ?? 'unknown',
    host: hostname(),
  };
  const draft = join(folder, `lock-draft-${process.pid}-${process.hrtime.bigint()}`);
  writeFileSync(draft, `${JSON.stringify(own)}\n`, { mode: 0o600 });
  try {
    for (let tries = 0; tries < TRIES_MAX; tries += 1) {
      const last = lockNumbers(folder).at(-1) ?? 0;
      if (last > 0) refuseIfAlive(folder, last);
      const number = last + 1;
      if (!linkIfFree(draft, lockFile(folder, number))) continue;
      const numbers = lockNumbers(folder);
      if (numbers.at(-1) === number) {
        for (const dead of numbers.slice(0, -1)) rmSync(lockFile(folder, dead), { force: true });
        return () => rmSync(lockFile(folder, number), { force: true });
      }
      // Somebody overtook between the look and the link: theirs counts.
      rmSync(lockFile(folder, number), { force: true });
    }
  } finally {
    rmSync(draft, { force: true });
  }
  throw new FolderLockedError(`The folder ${folder} could not be locked in ${TRIES_MAX} tries.`);
}

/** The process id that holds the folder now, or null. */
export function folderHolder(folder: string): number | null {
  const last = lockNumbers(folder).at(-1);
  const holder = last === undefined ? null : readHolder(lockFile(folder, last));
  return holder !== null && isAlive(holder) ? holder.pid : null;
}

/**
 * When a process was born, in terms that no later process with the same id shares; null when there
 * is no such process.
 */
export function processBirth(pid: number): string | null {
  if (process.platform === 'linux') {
    try {
      // The name in parentheses may hold spaces; the start time is field 22 of the whole line and
      // the state is field 3, right after the name (proc_pid_stat(5)).
      const fields = readFileSync(`/proc/${pid}/stat`, 'utf8')
        .replace(/^.*\) /s, '')
        .split(' ');
      if (fields[0] === 'Z') return null;
      return `${readFileSync('/proc/sys/kernel/random/boot_id', 'utf8').trim()}:${fields[19]}`;
    } catch {
      return null;
    }
  }
  const listing = spawnSync('ps', ['-o', 'lstart=', '-p', String(pid)], { encoding: 'utf8' });
  const birth = listing.status === 0 ? listing.stdout.trim() : '';
  return birth === '' ? null : birth;
}

function refuseIfAlive(folder: string, number: number): void {
  const file = lockFile(folder, number);
  const holder = readHolder(file);
  if (holder === null) return;
  if (holder.host !== hostname()) {
    throw new FolderLockedError(
      `The folder ${folder} is held by process ${holder.pid} on the host ${holder.host}, which ` +
        `cannot be looked at from here. If no process runs there any more, remove ${file}.`,
    );
  }
  if (isAlive(holder)) {
    throw new FolderLockedError(
      `The folder ${folder} is in use by another process, number ${holder.pid}.`,
    );
  }
}

function isAlive(holder: Holder): boolean {
  return holder.host === hostname() && processBirth(holder.pid) === holder.birth;
}

/** Null when the file has gone since it was listed. */
function readHolder(file: string): Holder | null {
  let text: string;
  try {
    text = readFileSync(file, 'utf8');
  } catch {
    return null;
  }
  const holder: unknown = JSON.parse(text);
  if (isHolder(holder)) return holder;
  throw new FolderLockedError(`${file} is not a lock file. If no process runs there, remove it.`);
}

function isHolder(value: unknown): value is Holder {
  if (typeof value !== 'object' || value === null) return false;
  const { pid, birth, host } = value as Partial<Record<keyof Holder, unknown>>;
  return Number.isInteger(pid) && typeof birth === 'string' && typeof host === 'string';
}

function lockNumbers(folder: string): number[] {
  return readdirSync(folder)
    .flatMap((name) => LOCK_NAME.exec(name)?.[1] ?? [])
    .map(Number)
    .sort((a, b) => a - b);
}

function lockFile(folder: string, number: number): string {
  return join(folder, `lock.${number}`);
}

/** Hard links are made in one step with the content already there; false when the name is taken. */
function linkIfFree(from: string, to: string): boolean {
  try {
    linkSync(from, to);
    return true;
  } catch (error) {
    if (error instanceof Error && 'code' in error && error.code === 'EEXIST') return false;
    throw error;
  }
}
