// Generates the records client. The Prisma command wants a schema engine at hand even for this,
// which needs none, and would try to download it: any existing program in its place stops that.
import { spawnSync } from 'node:child_process';
import { createRequire } from 'node:module';

const prisma = createRequire(import.meta.url).resolve('prisma/build/index.js');
const result = spawnSync(process.execPath, [prisma, 'generate'], {
  env: { ...process.env, PRISMA_SCHEMA_ENGINE_BINARY: process.execPath, CHECKPOINT_DISABLE: '1' },
  encoding: 'utf8',
});
if (result.status !== 0) {
  process.stderr.write(`${result.stdout}\n${result.stderr}\n`);
  process.exitCode = 1;
}
