import { readFileSync } from 'node:fs';
import postgres from 'postgres';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { factsOfCatalogue } from '../support/catalogue-facts.ts';
import { type ClonedDatabase, cloneDatabase } from '../support/database.ts';
import { factsOfPrismaSchema } from '../support/prisma-schema.ts';

const schema = readFileSync(new URL('../../prisma/schema.prisma', import.meta.url), 'utf8');

let database: ClonedDatabase;
let sql: postgres.Sql;

beforeAll(async () => {
  database = await cloneDatabase();
  sql = postgres(database.url, { max: 1, onnotice: () => undefined });
});

afterAll(async () => {
  await sql.end();
  await database.drop();
});

/** The facts after a change that is undone again. */
async function factsAfter(change: string): Promise<readonly string[]> {
  await sql`begin`;
  try {
    await sql.unsafe(change);
    return await factsOfCatalogue(sql);
  } finally {
    await sql`rollback`;
  }
}

// reference: PostgreSQL's own catalogue, read from a database that the migrations made
describe('schema.prisma and the migrated database', () => {
  test('agree in columns, types, nullability, defaults and keys', async () => {
    const facts = await factsOfCatalogue(sql);
    expect(facts.length).toBeGreaterThan(200);
    expect(facts).toEqual(factsOfPrismaSchema(schema));
  });

  test.each([
    ['a table more', 'create table extra (id uuid primary key)'],
    ['a column more', 'alter table labs add column extra text'],
    ['a column less', 'alter table accounts drop column closed_at'],
    ['another type', 'alter table trials alter column period type bigint'],
    ['another precision', 'alter table labs alter column created_at type timestamptz(6)'],
    ['nullable', 'alter table labs alter column name drop not null'],
    ['not nullable', 'alter table accounts alter column closed_at set not null'],
    ['a default more', `alter table labs alter column name set default ''`],
    ['another default', 'alter table analyses alter column cancel_requested set default true'],
    ['a unique key less', 'drop index labs_name_key'],
    ['a unique key more', 'create unique index on accounts (name)'],
    ['a primary key less', 'alter table looks drop constraint looks_pkey'],
    [
      'a key in another order',
      'drop index sites_lab_id_name_key; create unique index on sites (name, lab_id)',
    ],
    ['an index less', 'drop index trials_study_id_idx'],
    ['a foreign key less', 'alter table sites drop constraint sites_lab_id_fkey'],
    [
      'another action of a foreign key',
      `alter table sites drop constraint sites_lab_id_fkey;
       alter table sites add foreign key (lab_id) references labs (id)
         on delete cascade on update cascade`,
    ],
  ])('disagree when the database has %s', async (_what, change) => {
    expect(await factsAfter(change)).not.toEqual(factsOfPrismaSchema(schema));
  });

  test.each([
    ['a model more', /$/, '\nmodel Extra {\n  id String @id @db.Uuid\n}\n'],
    ['a field more', /model Lab \{/, '$&\n  extra String?'],
    ['a field less', /\n {2}expiresAt .*/, ''],
    ['another name of a column', /"lab_id"/, '"laboratory_id"'],
    ['another name of a table', /@@map\("labs"\)/, '@@map("laboratories")'],
    ['an optional field', /(model Lab \{[^}]*name +String) /, '$1?'],
    ['a list', /(model Lab \{[^}]*name +String) /, '$1[]'],
    ['another type', /(model Lab \{[^}]*name +)String/, '$1Int'],
    ['a default less', /@default\(false\)/, ''],
    ['a key less', /@@unique\(\[labId, name\]\)/, ''],
    ['another action of a relation', /onDelete: Restrict/, 'onDelete: Cascade'],
  ])('disagree when schema.prisma has %s', async (_what, place, change) => {
    const changed = schema.replace(place, change);
    expect(changed).not.toBe(schema);
    expect(factsOfPrismaSchema(changed)).not.toEqual(await factsOfCatalogue(sql));
  });

  test.each([
    ['an enum', /$/, '\nenum Colour {\n  red\n}\n'],
    ['an attribute', /@@map\("labs"\)/, '@@map("labs")\n  @@schema("other")'],
    ['a field attribute', /(model Lab \{[^}]*)@unique/, '$1@updatedAt'],
    ['a type', /(model Lab \{[^}]*name +)String/, '$1Json'],
    ['a native type', /@db\.Uuid/, '@db.Xml'],
  ])(
    'are not compared when schema.prisma has %s that the reader does not know',
    (_what, place, change) => {
      expect(() => factsOfPrismaSchema(schema.replace(place, change))).toThrow(/not understood/);
    },
  );
});
