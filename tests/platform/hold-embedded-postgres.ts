// Run by the tests as a service would be: starts the embedded server on the folder named by the
// first argument, prints its URL, and stays until it is killed.
import { startEmbeddedPostgres } from '#platform/embedded-postgres.ts';

const folder = process.argv[2];
if (folder === undefined) throw new Error('Name a folder.');
const server = await startEmbeddedPostgres({ folder, log: () => undefined });
process.stdout.write(`url ${server.url}\n`);
setInterval(() => undefined, 60_000);
