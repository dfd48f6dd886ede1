import { readdirSync, writeFileSync } from 'node:fs';
import { hostname } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { describe, expect, test } from 'vitest';
import {
  FolderLockedError,
  folderHolder,
  lockFolder,
  processBirth,
} from '#platform/folder-lock.ts';
import { startNodeProgram } from '../support/node-program.ts';
import { temporaryFolder } from '../support/temporary-folder.ts';

const HOLDER = fileURLToPath(new URL('./hold-folder.ts', import.meta.url));

// common practice, no source: one holder at a time, freed by release or by the holder's death
describe('folder lock', () => {
  test('is refused while held, naming folder and process, and free after release', () => {
    const folder = temporaryFolder();
    const release = lockFolder(folder);
    expect(folderHolder(folder)).toBe(process.pid);
    expect(() => lockFolder(folder)).toThrow(FolderLockedError);
    expect(() => lockFolder(folder)).toThrow(folder);
    expect(() => lockFolder(folder)).toThrow(String(process.pid));
    release();
    expect(folderHolder(folder)).toBeNull();
    lockFolder(folder)();
    expect(readdirSync(folder)).toEqual([]);
  });

  test('a reused process id does not count as the holder', () => {
    const folder = temporaryFolder();
    // This very process is alive, but was not born when the file says.
    const holder = { pid: process.pid, birth: 'another boot:1', host: hostname() };
    writeFileSync(join(folder, 'lock.4'), JSON.stringify(holder));
    expect(folderHolder(folder)).toBeNull();
    const release = lockFolder(folder);
    expect(readdirSync(folder)).toEqual(['lock.5']);
    release();
  });

  test('a holder on another host cannot be judged and is not overruled', () => {
    const folder = temporaryFolder();
    const holder = { pid: 1, birth: 'x', host: 'elsewhere.invalid' };
    writeFileSync(join(folder, 'lock.1'), JSON.stringify(holder));
    expect(() => lockFolder(folder)).toThrow(/elsewhere\.invalid.*remove .*lock\.1/);
  });

  test('of 20 processes that succeed a dead holder at once, one does', async () => {
    const folder = temporaryFolder();
    const dead = startNodeProgram(HOLDER, { args: [folder] });
    await dead.line(/^held/);
    process.kill(dead.pid, 'SIGKILL');
    await dead.ended;
    const rivals = Array.from({ length: 20 }, () => startNodeProgram(HOLDER, { args: [folder] }));
    try {
      const said = await Promise.all(rivals.map((rival) => rival.line(/^(held|refused)/)));
      expect(said.filter((line) => line === 'held')).toHaveLength(1);
      const holder = rivals[said.indexOf('held')];
      expect(folderHolder(folder)).toBe(holder?.pid);
      for (const line of said) {
        if (line !== 'held')
          expect(line).toContain(`in use by another process, number ${holder?.pid}`);
      }
    } finally {
      for (const { pid } of rivals) process.kill(pid, 'SIGKILL');
      await Promise.all(rivals.map((rival) => rival.ended));
    }
  });

  test('the birth of a process is steady, and null when there is none', async () => {
    expect(processBirth(process.pid)).toBe(processBirth(process.pid));
    expect(processBirth(process.pid)).not.toBe(processBirth(process.ppid));
    const ended = startNodeProgram('--version');
    await ended.ended;
    expect(processBirth(ended.pid)).toBeNull();
  });
});
