import { execFileSync } from 'node:child_process';
import { readFileSync } from 'node:fs';
import path from 'node:path';
import ts from 'typescript';
import { describe, expect, it } from 'vitest';

/** Rooms of the core, each building on those before it and never on those after. */
const CORE_ROOMS = [
  'numerics',
  'hashing',
  'distributions',
  'protocol',
  'designs',
  'allocation',
  'models',
  'ranks',
  'inference',
  'analysis',
  'reporting',
];

/** Packages the core may use: pure, without input or output. */
const CORE_PACKAGES = ['jstat', '@noble/hashes'];

/** Features from the ground up: each may use those before it. */
const FEATURES = ['audit', 'access', 'studies', 'allocations', 'trials', 'analyses', 'reports'];

/** Files of a feature that others may import: its functions, its shapes, the audit log's door. */
const FEATURE_DOORS = /^(?:service|schemas|log)\.ts$/;

/** Files that put the features together or start the service. */
const COMPOSERS = ['app.ts', 'main.ts', 'worker.ts'];

interface SourceFile {
  /** Path from the top, with forward slashes. */
  readonly name: string;
  readonly text: string;
  readonly tree: ts.SourceFile;
}

const top = path.resolve(import.meta.dirname, '..');
const files = sourceFiles();

function sourceFiles(): SourceFile[] {
  const list = execFileSync('git', ['ls-files', '-co', '--exclude-standard', '--', '*.ts'], {
    cwd: top,
    encoding: 'utf8',
  });
  return list
    .split('\n')
    .filter((name) => name !== '' && !name.includes('/generated/'))
    .flatMap((name) => {
      try {
        const text = readFileSync(path.join(top, name), 'utf8');
        return [
          { name, text, tree: ts.createSourceFile(name, text, ts.ScriptTarget.Latest, true) },
        ];
      } catch {
        return []; // Deleted in the work tree, still in the index.
      }
    });
}

/** What a file imports, resolved to a path from the top, or the package's name as written. */
function importsOf(file: SourceFile): string[] {
  const specifiers: string[] = [];
  const visit = (node: ts.Node): void => {
    if (
      (ts.isImportDeclaration(node) || ts.isExportDeclaration(node)) &&
      node.moduleSpecifier !== undefined &&
      ts.isStringLiteral(node.moduleSpecifier)
    ) {
      specifiers.push(node.moduleSpecifier.text);
    }
    if (ts.isCallExpression(node) && node.expression.kind === ts.SyntaxKind.ImportKeyword) {
      const [argument] = node.arguments;
      if (argument !== undefined && ts.isStringLiteral(argument)) specifiers.push(argument.text);
    }
    ts.forEachChild(node, visit);
  };
  visit(file.tree);
  return specifiers.map((specifier) => resolved(file.name, specifier));
}

function resolved(from: string, specifier: string): string {
  if (specifier.startsWith('.')) return path.posix.join(path.posix.dirname(from), specifier);
  if (specifier.startsWith('#core/')) return `server/core/${specifier.slice(6)}`;
  if (specifier.startsWith('#platform/')) return `server/platform/${specifier.slice(10)}`;
  if (specifier.startsWith('#server/')) return `server/${specifier.slice(8)}`;
  return specifier;
}

function coreFault(file: SourceFile, target: string): string | null {
  if (!target.startsWith('server/')) {
    const known = CORE_PACKAGES.some((name) => target === name || target.startsWith(`${name}/`));
    return known ? null : `${file.name} imports ${target}: not a package of the core`;
  }
  if (!target.startsWith('server/core/')) return `${file.name} reaches out of the core: ${target}`;
  const from = CORE_ROOMS.indexOf(file.name.split('/')[2] ?? '');
  const to = CORE_ROOMS.indexOf(target.split('/')[2] ?? '');
  return from < to && from !== -1 ? `${file.name} imports a later room: ${target}` : null;
}

function shellFault(file: SourceFile, target: string): string | null {
  const [, room = '', door = ''] = target.split('/');
  const own = file.name.split('/')[1] ?? '';
  if (!target.startsWith('server/') || own === room || room === 'platform' || room === 'core') {
    return null;
  }
  if (own === 'platform') {
    // The one script that starts the app in order to write its document down.
    const writesDocument = file.name === 'server/platform/write-openapi.ts';
    return writesDocument ? null : `${file.name} imports a feature: ${target}`;
  }
  if (COMPOSERS.includes(own)) return null;
  if (FEATURES.indexOf(room) > FEATURES.indexOf(own))
    return `${file.name} imports upwards: ${target}`;
  return FEATURE_DOORS.test(door) ? null : `${file.name} does not use the service: ${target}`;
}

function importFaults(of: readonly SourceFile[]): string[] {
  return of
    .filter((file) => file.name.startsWith('server/'))
    .flatMap((file) => {
      const rule = file.name.startsWith('server/core/') ? coreFault : shellFault;
      return importsOf(file).flatMap((target) => rule(file, target) ?? []);
    });
}

/** Functions longer than a screen, by the span from signature to closing brace. */
function longFunctions(file: SourceFile, limit: number): string[] {
  const faults: string[] = [];
  const line = (position: number) => file.tree.getLineAndCharacterOfPosition(position).line;
  const visit = (node: ts.Node): void => {
    const isFunction =
      ts.isFunctionDeclaration(node) ||
      ts.isMethodDeclaration(node) ||
      ts.isFunctionExpression(node) ||
      ts.isArrowFunction(node);
    if (isFunction && !isComposition(node)) {
      const length = line(node.end) - line(node.getStart(file.tree)) + 1;
      if (length > limit)
        faults.push(`${file.name}:${line(node.getStart(file.tree)) + 1} ${length} lines`);
    }
    ts.forEachChild(node, visit);
  };
  visit(file.tree);
  return faults;
}

/**
 * A plugin that only lists routes, and a service factory that only returns its functions, are
 * tables in the form of a function: their parts are measured, not they.
 */
function isComposition(node: ts.Node): boolean {
  if (ts.isFunctionDeclaration(node)) return /^create\w+Service$/.test(node.name?.text ?? '');
  const parent = node.parent;
  return ts.isVariableDeclaration(parent) && /Routes$/.test(parent.name.getText());
}

describe('the house keeps its arrows', () => {
  it('has no import out of the core, upwards, or into another feature’s store', () => {
    expect(importFaults(files)).toEqual([]);
  });

  it('would see each kind of wrong arrow', () => {
    const wrong = (name: string, text: string): SourceFile => ({
      name,
      text,
      tree: ts.createSourceFile(name, text, ts.ScriptTarget.Latest, true),
    });
    const planted = [
      wrong('server/core/designs/a.ts', "import fs from 'node:fs';"),
      wrong('server/core/designs/b.ts', "import { x } from '#platform/database.ts';"),
      wrong('server/core/designs/c.ts', "import { x } from '../analysis/run-plan.ts';"),
      wrong('server/trials/d.ts', "import { x } from '../studies/store.ts';"),
      wrong('server/studies/e.ts', "export { x } from '#server/trials/service.ts';"),
      wrong('server/platform/f.ts', "const x = await import('../access/service.ts');"),
    ];
    expect(importFaults(planted)).toHaveLength(planted.length);
  });

  it('keeps clock, chance and environment out of the core', () => {
    const banned =
      /\b(?:Math\.random|Date\.now|new Date\(\)|process\.|globalThis\.crypto|performance\.)/;
    const faults = files
      .filter((file) => file.name.startsWith('server/core/') && banned.test(code(file)))
      .map((file) => file.name);
    expect(faults).toEqual([]);
  });

  it('reads the environment in the starting files and the configuration only', () => {
    const allowed = [
      'server/main.ts',
      'server/worker.ts',
      'server/platform/config.ts',
      'server/platform/embedded-postgres.ts',
      'server/platform/worker-processes.ts',
    ];
    const readers = files
      .filter((file) => file.name.startsWith('server/') && /\bprocess\.env\b/.test(code(file)))
      .map((file) => file.name);
    expect(readers.filter((name) => !allowed.includes(name))).toEqual([]);
  });
});

describe('the code stays readable', () => {
  const ours = files.filter((file) => /^(?:server|client-sdk|prisma)\//.test(file.name));

  it('has functions of at most 70 lines and files of at most 400', () => {
    expect(ours.flatMap((file) => longFunctions(file, 70))).toEqual([]);
    const long = ours.filter((file) => file.text.split('\n').length > 420).map((file) => file.name);
    expect(long).toEqual([]);
  });

  it('has lines of at most 100 columns', () => {
    const faults = files.flatMap((file) =>
      file.text
        .split('\n')
        .flatMap((text, index) =>
          text.length > 100 && !/https?:\/\/|^import |\/\/ /.test(text)
            ? [`${file.name}:${index + 1}`]
            : [],
        ),
    );
    expect(faults).toEqual([]);
  });

  it('leaves nothing marked unfinished, no loosened type and no vague file name', () => {
    const unfinished = new RegExp(['FIX' + 'ME', 'XX' + 'X', 'TO' + 'DO(?!\\(#\\d+\\))'].join('|'));
    const loosened = new RegExp(
      ['as unknown ' + 'as', '@ts-' + '(?:ignore|nocheck)', 'as an' + 'y\\b'].join('|'),
    );
    const vague = /(?:^|\/)(?:utils?|helpers?|common|misc)(?:\.ts|\/)/;
    const faults = files.filter(
      (file) => unfinished.test(file.text) || loosened.test(file.text) || vague.test(file.name),
    );
    expect(faults.map((file) => file.name)).toEqual([]);
  });
});

/** The text of a file without its comments, so that prose may name what code may not. */
function code(file: SourceFile): string {
  return file.text.replace(/\/\*[\s\S]*?\*\//g, '').replace(/(^|\s)\/\/.*$/gm, '');
}
