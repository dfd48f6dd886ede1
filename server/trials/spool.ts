import { createHash, randomUUID } from 'node:crypto';
import { type FileHandle, open, unlink } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { ProblemError } from '#platform/problems.ts';

/** A body received whole, on disk, so that it can be read again when a transaction is retried. */
export interface Spool {
  readonly sha256: string;
  /**
   * The bytes from the start, without a byte order mark; may be called again. A chunk is valid
   * until the next one is asked for.
   */
  read(): AsyncIterable<Buffer>;
  close(): Promise<void>;
}

const CHUNK_BYTES = 131_072;
const BYTE_ORDER_MARK = Buffer.from([0xef, 0xbb, 0xbf]);

/**
 * Receives a body into a file that has no name any more, so that nothing of it stays behind
 * whatever happens, and that nobody else can open. The database is asked for nothing meanwhile: a
 * slow sender holds neither a connection nor a lock.
 *
 * @throws {ProblemError} `payload-too-large` above `bytesMax`; `invalid-request` when the sender
 *   breaks off
 */
export async function spoolBody(body: AsyncIterable<Buffer>, bytesMax: number): Promise<Spool> {
  const path = join(tmpdir(), `fairturn-upload-${randomUUID()}`);
  const file = await open(path, 'wx+', 0o600);
  try {
    await unlink(path);
    const sha256 = await receive(body, file, bytesMax);
    return { sha256, read: () => chunksOf(file), close: () => file.close() };
  } catch (error) {
    await file.close();
    throw error;
  }
}

async function receive(
  body: AsyncIterable<Buffer>,
  file: FileHandle,
  bytesMax: number,
): Promise<string> {
  const hash = createHash('sha256');
  let bytes = 0;
  for await (const chunk of brokenOff(body)) {
    bytes += chunk.length;
    if (bytes > bytesMax) {
      throw new ProblemError('payload-too-large', `An upload may have ${bytesMax} bytes.`);
    }
    hash.update(chunk);
    await file.writeFile(chunk);
  }
  return hash.digest('hex');
}

/** Tells a sender that breaks off from a fault of our own. */
async function* brokenOff(body: AsyncIterable<Buffer>): AsyncGenerator<Buffer> {
  try {
    yield* body;
  } catch {
    throw new ProblemError('invalid-request', 'The body broke off before its end.');
  }
}

/** Every chunk lies in the same memory: it is the reader's until it asks for the next. */
async function* chunksOf(file: FileHandle): AsyncGenerator<Buffer> {
  const chunk = Buffer.allocUnsafe(CHUNK_BYTES);
  for (let position = 0; ; ) {
    const { bytesRead } = await file.read(chunk, 0, CHUNK_BYTES, position);
    if (bytesRead === 0) return;
    const isMarked = position === 0 && chunk.subarray(0, 3).equals(BYTE_ORDER_MARK);
    yield chunk.subarray(isMarked ? 3 : 0, bytesRead);
    position += bytesRead;
  }
}
