import { createHash } from 'node:crypto';
import { cpSync, mkdirSync, readdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import postgres from 'postgres';
import { afterEach, beforeEach, describe, expect, test } from 'vitest';
import { MigrationError, migrate } from '#platform/migrations.ts';
import { type ClonedDatabase, createEmptyDatabase } from '../support/database.ts';
import { temporaryFolder } from '../support/temporary-folder.ts';

const MIGRATIONS = fileURLToPath(new URL('../../prisma/migrations', import.meta.url));

let database: ClonedDatabase;
let sql: postgres.Sql;

beforeEach(async () => {
  database = await createEmptyDatabase();
  sql = postgres(database.url, { max: 1, onnotice: () => undefined });
});

afterEach(async () => {
  await sql.end();
  await database.drop();
});

function writeMigration(folder: string, name: string, script: string): void {
  mkdirSync(join(folder, name), { recursive: true });
  writeFileSync(join(folder, name, 'migration.sql'), script);
}

/** Two migrations, of which the second needs the first. */
function twoMigrations(): string {
  const folder = temporaryFolder();
  writeMigration(folder, '20260102000000_second', 'alter table notes add column text text;');
  writeMigration(folder, '20260101000000_first', 'create table notes (id int);\nselect 1;');
  writeFileSync(join(folder, 'migration_lock.toml'), 'provider = "postgresql"\n');
  return folder;
}

describe('migrations', () => {
  test('are applied in order, once, and booked as Prisma Migrate books them', async () => {
    const folder = twoMigrations();
    const names = ['20260101000000_first', '20260102000000_second'];
    expect(await migrate(database.url, folder)).toEqual({ applied: names });
    expect(await migrate(database.url, folder)).toEqual({ applied: [] });
    // from memory: columns of Prisma Migrate's table, checksum = SHA-256 of the file in hexadecimal
    const rows = await sql`
      select migration_name, checksum, logs, rolled_back_at, applied_steps_count,
        finished_at >= started_at as finished, length(id) as id_length
      from _prisma_migrations order by migration_name`;
    expect(rows).toEqual(
      names.map((name) => ({
        migration_name: name,
        checksum: createHash('sha256')
          .update(readFileSync(join(folder, name, 'migration.sql')))
          .digest('hex'),
        logs: null,
        rolled_back_at: null,
        applied_steps_count: 1,
        finished: true,
        id_length: 36,
      })),
    );
  });

  test('20 servers that start at once apply each migration once', async () => {
    const copy = temporaryFolder();
    cpSync(MIGRATIONS, copy, { recursive: true });
    const names = readdirSync(copy, { withFileTypes: true })
      .filter((entry) => entry.isDirectory())
      .map(({ name }) => name)
      .sort();
    expect(names.length).toBeGreaterThan(0);
    const results = await Promise.all(Array.from({ length: 20 }, () => migrate(database.url)));
    expect(results.flatMap(({ applied }) => applied).sort()).toEqual(names);
    const rows = await sql`select migration_name from _prisma_migrations order by 1`;
    expect(rows.map((row) => row.migration_name)).toEqual(names);
  });

  test('one changed after it was applied is refused by name', async () => {
    const folder = twoMigrations();
    await migrate(database.url, folder);
    writeMigration(folder, '20260101000000_first', 'create table notes (id bigint);');
    await expect(migrate(database.url, folder)).rejects.toThrow(
      /20260101000000_first was changed after it had been applied/,
    );
  });

  test('a database with one that this server does not know is refused', async () => {
    const newer = twoMigrations();
    await migrate(database.url, newer);
    const older = temporaryFolder();
    writeMigration(older, '20260101000000_first', 'create table notes (id int);\nselect 1;');
    await expect(migrate(database.url, older)).rejects.toThrow(
      /newer than this server.*20260102000000_second/,
    );
  });

  test('one that fails leaves nothing of itself and keeps those before it', async () => {
    const folder = twoMigrations();
    writeMigration(
      folder,
      '20260103000000_third',
      'create table half_made (id int); alter table absent add column x int;',
    );
    const fault = await migrate(database.url, folder).catch((error: unknown) => error);
    expect(fault).toBeInstanceOf(MigrationError);
    expect(String(fault)).toMatch(/20260103000000_third failed: relation "absent" does not exist/);
    expect(await sql`select to_regclass('half_made') as found`).toEqual([{ found: null }]);
    expect(await sql`select migration_name from _prisma_migrations order by 1`).toEqual([
      { migration_name: '20260101000000_first' },
      { migration_name: '20260102000000_second' },
    ]);
    // Put right, it is applied at the next start.
    writeMigration(folder, '20260103000000_third', 'create table half_made (id int);');
    expect(await migrate(database.url, folder)).toEqual({ applied: ['20260103000000_third'] });
  });

  test('one that another tool began and did not finish is refused by name', async () => {
    const folder = twoMigrations();
    await migrate(database.url, folder);
    await sql`update _prisma_migrations set finished_at = null
      where migration_name = '20260102000000_second'`;
    await expect(migrate(database.url, folder)).rejects.toThrow(
      /20260102000000_second was begun by another tool and did not finish/,
    );
    // Marked as rolled back, it counts as not applied (and fails here, since its column is there).
    await sql`update _prisma_migrations set rolled_back_at = now()
      where migration_name = '20260102000000_second'`;
    await expect(migrate(database.url, folder)).rejects.toThrow(/already exists/);
  });

  test('wait for whoever holds the lock', async () => {
    await sql`select pg_advisory_lock(72707369)`;
    let done = false;
    const waiting = migrate(database.url, twoMigrations()).then(() => {
      done = true;
    });
    const watcher = postgres(database.url, { max: 1 });
    const waiters = () => watcher`
      select 1 from pg_locks where locktype = 'advisory' and not granted
        and database = (select oid from pg_database where datname = current_database())`;
    while ((await waiters()).length === 0) await new Promise((settle) => setTimeout(settle, 10));
    expect(done).toBe(false);
    expect(await watcher`select to_regclass('notes') as found`).toEqual([{ found: null }]);
    await sql`select pg_advisory_unlock(72707369)`;
    await waiting;
    expect(done).toBe(true);
    await watcher.end();
  });
});
