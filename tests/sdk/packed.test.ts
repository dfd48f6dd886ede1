import { execFile, spawnSync } from 'node:child_process';
import { existsSync, readdirSync, readFileSync, writeFileSync } from 'node:fs';
import path from 'node:path';
import { promisify } from 'node:util';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { temporaryFolder } from '../support/temporary-folder.ts';
import { type InstalledSdk, installSdk } from './installed-sdk.ts';
import { type ListeningService, startListeningService } from './listening-service.ts';

const COMPILER = path.resolve(import.meta.dirname, '../../node_modules/typescript/bin/tsc');

let sdk: InstalledSdk;
let service: ListeningService;

beforeAll(async () => {
  service = await startListeningService();
  sdk = installSdk(temporaryFolder());
});

afterAll(() => service.close());

/**
 * The Nodes of this machine, one for each release: the tests' own and, if it differs, the host's.
 */
function nodes(): string[] {
  const onPath = (process.env.PATH ?? '')
    .split(path.delimiter)
    .map((folder) => path.join(folder, 'node'))
    .filter((file) => existsSync(file));
  const byVersion = new Map<string, string>();
  for (const file of [process.execPath, ...onPath]) {
    const { stdout } = spawnSync(file, ['--version'], { encoding: 'utf8' });
    if (/^v\d+/.test(stdout ?? '')) byVersion.set(stdout.trim(), file);
  }
  return [...byVersion.values()];
}

const PROGRAM = `
import { Fairturn, isProblem, Outbox } from '@fairturn/client';
import { openFileOutbox } from '@fairturn/client/node';
const [url, token, folder] = process.argv.slice(2);
const fairturn = new Fairturn({ url, token });
const outbox = await Outbox.open({ fairturn, storage: await openFileOutbox(folder) });
const name = 'Lab of ' + process.version;
await outbox.add({ path: '/v1/labs', body: JSON.stringify({ name }) });
const outcome = await outbox.flush();
await outbox.close();
try {
  await fairturn.labs.create({ name });
} catch (error) {
  if (!isProblem(error, 'already-exists')) throw error;
  console.log(JSON.stringify({ ...outcome, refused: error.type }));
}
`;

describe('the package that npm pack makes', () => {
  it('holds what runs and its types, its README, and neither sources nor the demo', () => {
    expect(readdirSync(sdk.package).sort()).toEqual(['README.md', 'dist', 'package.json']);
    const files = readdirSync(path.join(sdk.package, 'dist'), { recursive: true }).map(String);
    const others = files.filter((name) => /\.\w+$/.test(name) && !/\.(?:d\.ts|js)$/.test(name));
    expect(others).toEqual([]);
    expect(files.filter((name) => name.includes('demo'))).toEqual([]);
  });

  it.each(nodes())('runs on %s', async (node) => {
    const program = path.join(sdk.folder, 'program.js');
    writeFileSync(program, PROGRAM);
    const outbox = path.join(sdk.folder, `outbox-${nodes().indexOf(node)}`);
    // The service lives in this process, which must not stand still meanwhile.
    const { stdout } = await promisify(execFile)(
      node,
      [program, service.url, service.administratorToken, outbox],
      { cwd: sdk.folder, timeout: 30_000 },
    );
    expect(JSON.parse(stdout)).toMatchObject({
      sent: 1,
      setAside: 0,
      refused: 'already-exists',
    });
  });

  it('needs nothing of Node’s in its main entry, so that browsers can load it', () => {
    const seen = new Set<string>();
    const visit = (file: string): void => {
      if (seen.has(file)) return;
      seen.add(file);
      const text = readFileSync(file, 'utf8');
      for (const [, specifier = ''] of text.matchAll(/from ['"]([^'"]+)['"]/g)) {
        if (specifier.startsWith('.')) visit(path.resolve(path.dirname(file), specifier));
        else expect(specifier).toBe('openapi-fetch');
      }
      expect(text).not.toMatch(/\bprocess\.|\bBuffer\b|\brequire\(/);
    };
    const { exports } = JSON.parse(readFileSync(path.join(sdk.package, 'package.json'), 'utf8'));
    visit(path.join(sdk.package, exports['.'].default));
    expect(seen.size).toBeGreaterThan(10);
  });

  it('refuses each wrong call by its types, and takes the right ones', () => {
    const source = readFileSync(path.join(import.meta.dirname, 'types-for-consumers.ts'), 'utf8');
    writeFileSync(path.join(sdk.folder, 'calls.ts'), source);
    const compilerOptions = {
      strict: true,
      exactOptionalPropertyTypes: true,
      noEmit: true,
      target: 'es2022',
      module: 'nodenext',
      lib: ['es2022', 'dom'],
      types: [],
    };
    const project = path.join(sdk.folder, 'tsconfig.json');
    writeFileSync(project, JSON.stringify({ compilerOptions, files: ['calls.ts'] }));
    const { stdout, status } = spawnSync(process.execPath, [COMPILER, '-p', project], {
      encoding: 'utf8',
      cwd: sdk.folder,
    });
    expect(stdout).toBe('');
    expect(status).toBe(0);
  });
});
