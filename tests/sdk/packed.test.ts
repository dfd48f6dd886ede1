import { execFile, execFileSync, spawnSync } from 'node:child_process';
import {
  existsSync,
  mkdirSync,
  readdirSync,
  readFileSync,
  realpathSync,
  symlinkSync,
  writeFileSync,
} from 'node:fs';
import path from 'node:path';
import { promisify } from 'node:util';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { temporaryFolder } from '../support/temporary-folder.ts';
import { type ListeningService, startListeningService } from './listening-service.ts';

const top = path.resolve(import.meta.dirname, '../..');
const modules = path.join(top, 'node_modules');

/** The package as `npm pack` makes it, installed in a folder beside what it depends on. */
let consumer: string;
let installed: string;
let service: ListeningService;

beforeAll(async () => {
  service = await startListeningService();
  consumer = temporaryFolder();
  npm(['run', '--silent', 'build:sdk'], top);
  // The scripts would clear `dist` while other tests may be reading it.
  npm(['pack', '--ignore-scripts', '--pack-destination', consumer], path.join(top, 'client-sdk'));
  const tarball = readdirSync(consumer).find((name) => name.endsWith('.tgz'));
  installed = path.join(consumer, 'node_modules/@fairturn/client');
  mkdirSync(installed, { recursive: true });
  execFileSync('tar', ['-xzf', path.join(consumer, String(tarball)), '-C', installed, '--strip=1']);
  for (const name of dependenciesOf(path.join(modules, 'openapi-fetch'), ['openapi-fetch'])) {
    symlinkSync(realpathSync(path.join(modules, name)), path.join(consumer, 'node_modules', name));
  }
  writeFileSync(path.join(consumer, 'package.json'), '{ "type": "module" }\n');
});

afterAll(() => service.close());

function npm(args: string[], cwd: string): void {
  execFileSync('npm', args, { cwd, stdio: 'pipe' });
}

/** A package and what it needs in turn, all of which npm has put beside each other. */
function dependenciesOf(folder: string, found: string[]): string[] {
  const { dependencies = {} } = JSON.parse(readFileSync(path.join(folder, 'package.json'), 'utf8'));
  for (const name of Object.keys(dependencies)) {
    if (found.includes(name)) continue;
    found.push(name);
    dependenciesOf(path.join(modules, name), found);
  }
  return found;
}

/** The Nodes of this machine, one for each release: the tests' own and, if it differs, the host's. */
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
    expect(readdirSync(installed).sort()).toEqual(['README.md', 'dist', 'package.json']);
    const files = readdirSync(path.join(installed, 'dist'), { recursive: true }).map(String);
    expect(files.filter((name) => /\.\w+$/.test(name) && !/\.(?:d\.ts|js)$/.test(name))).toEqual(
      [],
    );
  });

  it.each(nodes())('runs on %s', async (node) => {
    const program = path.join(consumer, 'program.js');
    writeFileSync(program, PROGRAM);
    const folder = path.join(consumer, `outbox-${nodes().indexOf(node)}`);
    // The service lives in this process, which must not stand still meanwhile.
    const { stdout } = await promisify(execFile)(
      node,
      [program, service.url, service.administratorToken, folder],
      { cwd: consumer, timeout: 30_000 },
    );
    expect(JSON.parse(stdout)).toMatchObject({ sent: 1, setAside: 0, refused: 'already-exists' });
  });

  it('needs nothing of Node’s in its main entry, so that browsers can load it', () => {
    const seen = new Set<string>();
    const visit = (file: string): void => {
      if (seen.has(file)) return;
      seen.add(file);
      for (const [, specifier = ''] of readFileSync(file, 'utf8').matchAll(/from '([^']+)'/g)) {
        if (specifier.startsWith('.')) visit(path.resolve(path.dirname(file), specifier));
        else expect(specifier).toBe('openapi-fetch');
      }
      expect(readFileSync(file, 'utf8')).not.toMatch(/\bprocess\.|\bBuffer\b/);
    };
    const { exports } = JSON.parse(readFileSync(path.join(installed, 'package.json'), 'utf8'));
    visit(path.join(installed, exports['.'].default));
    expect(seen.size).toBeGreaterThan(5);
  });

  it('refuses each wrong call by its types, and takes the right ones', () => {
    const source = readFileSync(path.join(import.meta.dirname, 'types-for-consumers.ts'), 'utf8');
    writeFileSync(path.join(consumer, 'calls.ts'), source);
    const options = ['--strict', '--exactOptionalPropertyTypes', '--noEmit', '--types', ''];
    const target = ['--target', 'es2022', '--module', 'nodenext', '--lib', 'es2022,dom'];
    const compiler = path.join(modules, 'typescript/bin/tsc');
    const result = spawnSync(
      process.execPath,
      [compiler, ...options, ...target, path.join(consumer, 'calls.ts')],
      { encoding: 'utf8', cwd: consumer },
    );
    expect(result.stdout).toBe('');
    expect(result.status).toBe(0);
  });
});
