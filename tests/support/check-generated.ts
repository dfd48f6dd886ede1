// Makes anew what is generated and committed, and fails on a difference: part of `npm run check`.
import { execFileSync } from 'node:child_process';
import { mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join, resolve } from 'node:path';
import { currentOpenApi } from '../../server/platform/write-openapi.ts';

const top = resolve(import.meta.dirname, '../..');

/** Files that are generated and committed, of which the code would now make something else. */
export async function outdatedFiles(): Promise<string[]> {
  const openApi = await currentOpenApi();
  const made: Record<string, string> = {
    'openapi.yaml': openApi,
    'client-sdk/src/generated/api.ts': sdkTypes(openApi),
  };
  return Object.keys(made).filter((name) => readFileSync(join(top, name), 'utf8') !== made[name]);
}

/** What `npm run generate:sdk` makes of a document. */
function sdkTypes(openApi: string): string {
  const folder = mkdtempSync(join(tmpdir(), 'fairturn-generated-'));
  try {
    const document = join(folder, 'openapi.yaml');
    const types = join(folder, 'api.ts');
    writeFileSync(document, openApi);
    const program = join(top, 'node_modules/openapi-typescript/bin/cli.js');
    execFileSync(process.execPath, [program, document, '-o', types], { stdio: 'pipe' });
    return readFileSync(types, 'utf8');
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

if (import.meta.main) {
  const outdated = await outdatedFiles();
  for (const name of outdated) {
    process.stderr.write(`${name} is not what the code makes: run npm run generate\n`);
  }
  process.exitCode = outdated.length === 0 ? 0 : 1;
}
