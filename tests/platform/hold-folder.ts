// Run by the tests: locks the folder named by the first argument, says whether that worked, and
// stays until it is killed.
import { lockFolder } from '#platform/folder-lock.ts';

const folder = process.argv[2];
if (folder === undefined) throw new Error('Name a folder.');
try {
  lockFolder(folder);
  process.stdout.write('held\n');
} catch (error) {
  process.stdout.write(`refused ${error instanceof Error ? error.message : String(error)}\n`);
}
setInterval(() => undefined, 60_000);
