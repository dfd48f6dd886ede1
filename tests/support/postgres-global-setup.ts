import {
  chmodSync,
  existsSync,
  mkdtempSync,
  readdirSync,
  rmSync,
  statSync,
  writeFileSync,
} from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import postgres from 'postgres';
import type { TestProject } from 'vitest/node';
import { startEmbeddedPostgres } from '#platform/embedded-postgres.ts';
import { folderHolder } from '#platform/folder-lock.ts';
import { migrate } from '#platform/migrations.ts';
import { databaseUrl } from './database-url.ts';

/** What the test files get: where the server is, and the database that they clone. */
export interface TestServer {
  /** A database to connect to for making and dropping others; nothing is kept in it. */
  readonly adminUrl: string;
  readonly template: string;
}

declare module 'vitest' {
  interface ProvidedContext {
    testServer: TestServer;
  }
}

const FOLDER_PREFIX = 'fairturn-test-';
/** Marks a folder that a failed test's database lies in. */
const KEPT_MARK = 'kept';
/** A folder younger than this may belong to a run that is just starting. */
const ABANDONED_AFTER_MS = 60_000;

/**
 * One PostgreSQL server and one migrated template database for the whole run, stopped at its end
 * whatever the tests did. FAIRTURN_TEST_DATABASE_URL names a server to use instead; its role must
 * be allowed to create databases.
 */
export default async function setup(project: TestProject): Promise<() => Promise<void>> {
  const given = process.env.FAIRTURN_TEST_DATABASE_URL;
  if (given !== undefined && given !== '') return useServer(project, given);
  await sweepAbandoned();
  const folder = mkdtempSync(join(tmpdir(), FOLDER_PREFIX));
  const server = await startEmbeddedPostgres({ folder, log: () => undefined, durable: false });
  let removeTemplate: () => Promise<void>;
  try {
    removeTemplate = await useServer(project, server.url);
  } catch (error) {
    await server.stop();
    rmSync(folder, { recursive: true, force: true });
    throw error;
  }
  return async () => {
    const kept = await keptClones(server.url);
    await removeTemplate();
    await server.stop();
    if (kept.length === 0) return rmSync(folder, { recursive: true, force: true });
    writeFileSync(join(folder, KEPT_MARK), `${kept.join('\n')}\n`);
    process.stdout.write(
      `Databases of failed tests (${kept.join(', ')}) lie in ${folder}; ` +
        `FAIRTURN_DATA_DIR=${folder} npm start starts their server. Remove it when done.\n`,
    );
  };
}

async function useServer(project: TestProject, url: string): Promise<() => Promise<void>> {
  const adminUrl = databaseUrl(url, 'postgres');
  const template = `fairturn_template_${process.pid}`;
  const admin = postgres(adminUrl, { max: 1, onnotice: () => undefined });
  try {
    await admin`drop database if exists ${admin(template)} with (force)`;
    await admin`create database ${admin(template)}`;
  } catch (error) {
    throw new Error(
      'No test server at FAIRTURN_TEST_DATABASE_URL; unset it and the tests start their own.',
      { cause: error },
    );
  } finally {
    await admin.end();
  }
  await migrate(databaseUrl(url, template));
  project.provide('testServer', { adminUrl, template });
  return async () => {
    const sql = postgres(adminUrl, { max: 1, onnotice: () => undefined });
    await sql`drop database if exists ${sql(template)} with (force)`;
    await sql.end();
  };
}

async function keptClones(url: string): Promise<string[]> {
  const sql = postgres(databaseUrl(url, 'postgres'), { max: 1 });
  try {
    const rows = await sql<{ datname: string }[]>`
      select datname from pg_database
      where shobj_description(oid, 'pg_database') = 'kept: a test failed' order by datname`;
    return rows.map((row) => row.datname);
  } finally {
    await sql.end();
  }
}

/** A killed run leaves a server behind; starting on its folder stops it, and then it can go. */
async function sweepAbandoned(): Promise<void> {
  for (const name of readdirSync(tmpdir())) {
    const folder = join(tmpdir(), name);
    if (!name.startsWith(FOLDER_PREFIX) || existsSync(join(folder, KEPT_MARK))) continue;
    try {
      if (Date.now() - statSync(folder).mtimeMs < ABANDONED_AFTER_MS) continue;
      if (folderHolder(folder) !== null) continue;
      chmodSync(folder, 0o711);
      const left = await startEmbeddedPostgres({ folder, log: () => undefined, durable: false });
      await left.stop();
      rmSync(folder, { recursive: true, force: true });
    } catch {
      // Another run sweeps it, or it belongs to somebody else: not ours to clear.
    }
  }
}
