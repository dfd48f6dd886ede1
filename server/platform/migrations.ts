import { createHash, randomUUID } from 'node:crypto';
import { existsSync, readdirSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import postgres from 'postgres';

/** Thrown when the database cannot be brought to this server's schema; says why. */
export class MigrationError extends Error {
  override readonly name = 'MigrationError';
}

interface Migration {
  readonly name: string;
  readonly script: string;
  /** SHA-256 of the script, in hexadecimal. */
  readonly checksum: string;
}

interface AppliedRow {
  readonly migration_name: string;
  readonly checksum: string;
  readonly finished_at: Date | null;
}

const MIGRATIONS_FOLDER = fileURLToPath(new URL('../../prisma/migrations', import.meta.url));

/** The advisory lock that Prisma Migrate takes too, so that the two cannot run side by side. */
const MIGRATION_LOCK = 72_707_369;

/**
 * Applies the migrations that the database does not have yet, oldest name first, each in one
 * transaction with its row in Prisma Migrate's bookkeeping table. Servers that start at once wait
 * for each other.
 *
 * @param folder holds one folder a migration, each with `migration.sql`
 * @returns the names applied now
 * @throws {MigrationError} when an applied migration was changed since, when the database has one
 *   that this server does not know (its schema is newer), or when one fails
 */
export async function migrate(
  url: string,
  folder: string = MIGRATIONS_FOLDER,
): Promise<{ applied: string[] }> {
  const migrations = readMigrations(folder);
  // One connection: the lock belongs to its session, and goes with it whatever happens.
  const sql = postgres(url, { max: 1, onnotice: () => undefined });
  try {
    await sql`select pg_advisory_lock(${MIGRATION_LOCK})`;
    await createBookkeeping(sql);
    const known = await sql<AppliedRow[]>`
      select migration_name, checksum, finished_at from _prisma_migrations
      where rolled_back_at is null order by started_at`;
    const done = checkApplied(known, migrations);
    const applied: string[] = [];
    for (const migration of migrations) {
      if (done.has(migration.name)) continue;
      await apply(sql, migration);
      applied.push(migration.name);
    }
    return { applied };
  } finally {
    await sql.end();
  }
}

function readMigrations(folder: string): Migration[] {
  if (!existsSync(folder)) return [];
  return readdirSync(folder, { withFileTypes: true })
    .filter((entry) => entry.isDirectory())
    .map(({ name }) => {
      const script = readFileSync(join(folder, name, 'migration.sql'), 'utf8');
      return { name, script, checksum: createHash('sha256').update(script).digest('hex') };
    })
    .sort((a, b) => (a.name < b.name ? -1 : 1));
}

/** The names applied already. Refuses a database that does not fit the migrations at hand. */
function checkApplied(known: readonly AppliedRow[], migrations: readonly Migration[]): Set<string> {
  for (const row of known) {
    const migration = migrations.find(({ name }) => name === row.migration_name);
    if (migration === undefined) {
      throw new MigrationError(
        `The database's schema is newer than this server: it has the migration ` +
          `${row.migration_name}, which this version does not know. Start a newer version.`,
      );
    }
    if (row.finished_at === null) {
      throw new MigrationError(
        `The migration ${row.migration_name} was begun by another tool and did not finish. ` +
          'Put the database right by hand, then mark it as rolled back or finished.',
      );
    }
    if (row.checksum !== migration.checksum) {
      throw new MigrationError(
        `The migration ${row.migration_name} was changed after it had been applied to this ` +
          'database. Restore its file, and make the change in a new migration.',
      );
    }
  }
  return new Set(known.map((row) => row.migration_name));
}

async function apply(sql: postgres.Sql, migration: Migration): Promise<void> {
  const startedAt = new Date();
  try {
    await sql.begin(async (tx) => {
      await tx.unsafe(migration.script).simple();
      await tx`
        insert into _prisma_migrations
          (id, checksum, finished_at, migration_name, started_at, applied_steps_count)
        values (${randomUUID()}, ${migration.checksum}, ${new Date()}, ${migration.name},
          ${startedAt}, 1)`;
    });
  } catch (error) {
    const reason = error instanceof Error ? error.message : String(error);
    throw new MigrationError(`The migration ${migration.name} failed: ${reason}`, { cause: error });
  }
}

/** The table as Prisma Migrate makes it. */
async function createBookkeeping(sql: postgres.Sql): Promise<void> {
  await sql`
    create table if not exists _prisma_migrations (
      id varchar(36) primary key not null,
      checksum varchar(64) not null,
      finished_at timestamptz,
      migration_name varchar(255) not null,
      logs text,
      rolled_back_at timestamptz,
      started_at timestamptz not null default now(),
      applied_steps_count integer not null default 0
    )`;
}
