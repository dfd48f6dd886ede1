import { execFile } from 'node:child_process';
import { readFileSync } from 'node:fs';
import path from 'node:path';
import { promisify } from 'node:util';
import { expect, it } from 'vitest';
import { startNodeProgram } from '../support/node-program.ts';
import { temporaryFolder } from '../support/temporary-folder.ts';

const top = path.resolve(import.meta.dirname, '../..');
const run = promisify(execFile);

/** The shell blocks of README.md, in order: one script, as a reader would type it. */
function readmeScript(): string {
  const readme = readFileSync(path.join(top, 'README.md'), 'utf8');
  const blocks = [...readme.matchAll(/^```sh\n([\s\S]*?)^```$/gm)].map((match) => match[1]);
  if (blocks.length < 6) throw new Error('README.md lost its commands.');
  return `set -eu\n${blocks.join('\n')}`;
}

it('shows the whole job in commands that run as they are', async () => {
  const service = startNodeProgram(path.join(top, 'server/main.ts'), {
    environment: { FAIRTURN_DATA_DIR: temporaryFolder(), FAIRTURN_PORT: '0' },
  });
  const token = /fairturn_[\w-]{20,}/.exec(await service.line(/^\s*fairturn_/))?.[0] ?? '';
  const url = /http:\/\/\S+/.exec(await service.line(/listens on http/))?.[0] ?? '';
  const desk = temporaryFolder();
  const { stdout } = await run('sh', ['-c', readmeScript()], {
    cwd: desk,
    env: { PATH: process.env.PATH, URL: url, TOKEN: token },
  });
  const read = (name: string) => readFileSync(path.join(desk, name), 'utf8');
  const lines = stdout.trim().split('\n');
  // The last two blocks end in the answers to "is it the same?" and "is it intact?".
  expect(lines.slice(-2)).toEqual(['true', 'true']);
  expect(stdout).toContain('event: ended');
  expect(read('report.html')).toMatch(/^<!doctype html>/i);
  expect(JSON.parse(read('report.json'))).toBeTypeOf('object');
  service.child.kill('SIGTERM');
  expect(await service.ended).toBe(0);
});
