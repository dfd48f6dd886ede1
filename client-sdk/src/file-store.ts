import { mkdir, readdir, readFile, rm } from 'node:fs/promises';
import path from 'node:path';
import { replaceFile } from './file-outbox.ts';
import type { KeyValueStore } from './outbox-storage.ts';

const SUFFIX = '.json';

/**
 * A key-value store in a folder, one file a key, each replaced in one step and on the disk before
 * `set` resolves. File names are the hexadecimal of the keys, since file systems differ in what
 * they take for the same name.
 */
export async function openFileStore(folder: string): Promise<KeyValueStore> {
  await mkdir(folder, { recursive: true, mode: 0o700 });
  const fileOf = (key: string) =>
    path.join(folder, `${Buffer.from(key, 'utf8').toString('hex')}${SUFFIX}`);
  return {
    get: async (key) => {
      try {
        return await readFile(fileOf(key), 'utf8');
      } catch (error) {
        if (error instanceof Error && 'code' in error && error.code === 'ENOENT') return null;
        throw error;
      }
    },
    set: (key, value) => replaceFile(fileOf(key), value),
    delete: (key) => rm(fileOf(key), { force: true }),
    keys: async () =>
      (await readdir(folder))
        .filter((name) => name.endsWith(SUFFIX))
        .map((name) => Buffer.from(name.slice(0, -SUFFIX.length), 'hex').toString('utf8')),
  };
}
