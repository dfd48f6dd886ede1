import { execFile } from 'node:child_process';
import { readFileSync, writeFileSync } from 'node:fs';
import path from 'node:path';
import { promisify } from 'node:util';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { startWorker } from '../support/analysis-worker.ts';
import type { NodeProgram } from '../support/node-program.ts';
import { temporaryFolder } from '../support/temporary-folder.ts';
import { type InstalledSdk, installSdk } from './installed-sdk.ts';
import { type ListeningService, startListeningService } from './listening-service.ts';

const README = path.resolve(import.meta.dirname, '../../client-sdk/README.md');
const COMPILER = path.resolve(import.meta.dirname, '../../node_modules/typescript/bin/tsc');

let service: ListeningService;
let worker: NodeProgram;
let sdk: InstalledSdk;

beforeAll(async () => {
  service = await startListeningService();
  worker = await startWorker(service.databaseUrl);
  sdk = installSdk(temporaryFolder());
});

afterAll(async () => {
  worker.child.kill('SIGTERM');
  await worker.ended;
  await service.close();
});

/** The examples of the README as the one program that they are. */
function program(): string {
  const blocks = [...readFileSync(README, 'utf8').matchAll(/^```ts\n(.*?)^```$/gms)];
  const given = `const [url = '', administratorToken = ''] = process.argv.slice(2);\n`;
  return given + blocks.map(([, block]) => block).join('\n');
}

describe('the README of the SDK', () => {
  it('has examples that run, on the package as packed, and say what the text says', async () => {
    const file = path.join(sdk.folder, 'readme.ts');
    writeFileSync(file, program());
    const { stdout } = await promisify(execFile)(
      process.execPath,
      [file, service.url, service.administratorToken],
      { cwd: sdk.folder, timeout: 50_000 },
    );
    expect(stdout).toContain('Harbour\n');
    expect(stdout).toMatch(/^[0-9a-f]{64}$/m);
    expect(stdout).toContain('2 trials stored, 0 deviations');
    expect(stdout).toContain('4 rows sent');
    expect(stdout).toContain('\nsent\n0 null\n');
    expect(stdout.match(/^true$/gm)).toHaveLength(2);
    expect(stdout).not.toMatch(/^false$/m);
    expect(stdout).toMatch(/already|code/i);
    expect(readFileSync(path.join(sdk.folder, 'report.html'), 'utf8')).toContain('Drill');
  });

  it('has examples that the types accept', async () => {
    const file = path.join(sdk.folder, 'readme-types.ts');
    // The two names that the reader brings; the rest is checked as it stands.
    const given = 'declare const url: string;\ndeclare const administratorToken: string;\n';
    writeFileSync(file, given + program().replace(/^.*\n/, ''));
    const types = path.resolve(import.meta.dirname, '../../node_modules/@types');
    const options = ['--strict', '--noEmit', '--target', 'es2022', '--module', 'nodenext'];
    const { stdout } = await promisify(execFile)(
      process.execPath,
      [COMPILER, ...options, '--lib', 'es2023', '--typeRoots', types, '--types', 'node', file],
      { cwd: sdk.folder },
    );
    expect(stdout).toBe('');
  });
});
