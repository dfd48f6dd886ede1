import { execFileSync } from 'node:child_process';
import {
  copyFileSync,
  mkdirSync,
  readdirSync,
  readFileSync,
  realpathSync,
  symlinkSync,
  writeFileSync,
} from 'node:fs';
import path from 'node:path';

const top = path.resolve(import.meta.dirname, '../..');
const modules = path.join(top, 'node_modules');

/** A folder in which the package is installed as `npm pack` makes it. */
export interface InstalledSdk {
  /** Programs put here can import `@fairturn/client`. */
  readonly folder: string;
  /** Where the package lies. */
  readonly package: string;
}

/**
 * Builds the SDK, packs it, and installs the tarball beside what it depends on, all in `folder`:
 * the work tree's own `dist` is left alone, since another test may be reading it.
 */
export function installSdk(folder: string): InstalledSdk {
  const source = path.join(folder, 'source');
  mkdirSync(source, { recursive: true });
  const compiler = path.join(modules, 'typescript/bin/tsc');
  const project = path.join(top, 'client-sdk');
  execFileSync(process.execPath, [compiler, '-p', project, '--outDir', path.join(source, 'dist')], {
    stdio: 'pipe',
  });
  for (const name of ['package.json', 'README.md']) {
    copyFileSync(path.join(project, name), path.join(source, name));
  }
  // The package's own script would build into `dist` again.
  execFileSync('npm', ['pack', '--ignore-scripts', '--pack-destination', folder], {
    cwd: source,
    stdio: 'pipe',
  });
  const tarball = readdirSync(folder).find((name) => name.endsWith('.tgz')) ?? '';
  const target = path.join(folder, 'node_modules/@fairturn/client');
  mkdirSync(target, { recursive: true });
  execFileSync('tar', ['-xzf', path.join(folder, tarball), '-C', target, '--strip=1']);
  for (const name of dependenciesOf(target, [])) {
    symlinkSync(realpathSync(path.join(modules, name)), path.join(folder, 'node_modules', name));
  }
  writeFileSync(path.join(folder, 'package.json'), '{ "type": "module" }\n');
  return { folder, package: target };
}

/** What a package needs in turn; npm has put it all beside each other. */
function dependenciesOf(folder: string, found: string[]): string[] {
  const { dependencies = {} } = JSON.parse(readFileSync(path.join(folder, 'package.json'), 'utf8'));
  for (const name of Object.keys(dependencies)) {
    if (found.includes(name)) continue;
    found.push(name);
    dependenciesOf(path.join(modules, name), found);
  }
  return found;
}
