import { randomBytes } from 'node:crypto';
import postgres from 'postgres';
import { afterEach, inject } from 'vitest';
import { databaseUrl } from './database-url.ts';

export interface ClonedDatabase {
  readonly name: string;
  readonly url: string;
  /** Removes the database; keeps it, and prints its name, when a test of the file failed. */
  drop(): Promise<void>;
}

/** PostgreSQL cannot copy a database while another copy of it is being made: one at a time. */
const CLONE_LOCK = 4_420_001;

// Importing this module watches the importing test file, so that `drop` knows how its tests ended.
let someTestFailed = false;
afterEach(({ task }) => {
  if (task.result?.state === 'fail') someTestFailed = true;
});

/** A migrated database without rows, of the caller's own: a copy of this run's template. */
export function cloneDatabase(): Promise<ClonedDatabase> {
  return copyDatabase(inject('testServer').template);
}

/** A database without any table, of the caller's own. */
export function createEmptyDatabase(): Promise<ClonedDatabase> {
  return copyDatabase('template0');
}

async function copyDatabase(template: string): Promise<ClonedDatabase> {
  const { adminUrl } = inject('testServer');
  const name = `fairturn_clone_${randomBytes(6).toString('hex')}`;
  await administer(adminUrl, async (sql) => {
    await sql`select pg_advisory_lock(${CLONE_LOCK})`;
    await sql`create database ${sql(name)} template ${sql(template)}`;
  });
  return {
    name,
    url: databaseUrl(adminUrl, name),
    drop: () =>
      administer(adminUrl, async (sql) => {
        if (someTestFailed) {
          await sql`comment on database ${sql(name)} is 'kept: a test failed'`;
          process.stdout.write(`A test failed; its database ${name} is kept.\n`);
        } else {
          await sql`drop database if exists ${sql(name)} with (force)`;
        }
      }),
  };
}

/** Runs statements on one connection, which takes its locks with it when it ends. */
async function administer(url: string, work: (sql: postgres.Sql) => Promise<void>): Promise<void> {
  const sql = postgres(url, { max: 1, onnotice: () => undefined });
  try {
    await work(sql);
  } finally {
    await sql.end();
  }
}
