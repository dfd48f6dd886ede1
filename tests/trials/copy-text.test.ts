import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { type Database, openDatabase, sqlState } from '#platform/database.ts';
import { copyRow, copyRows } from '#server/trials/copy-text.ts';
import { type ClonedDatabase, cloneDatabase } from '../support/database.ts';

let cloned: ClonedDatabase;
let database: Database;

beforeAll(async () => {
  cloned = await cloneDatabase();
  database = openDatabase({ url: cloned.url, poolSize: 2 });
  await database.sql`create table copied (id int primary key, text text,
    other int references copied (id) deferrable initially immediate)`;
});

afterAll(async () => {
  await database.close();
  await cloned.drop();
});

const copy = (rows: string) =>
  database.inSqlTransaction((tx) => copyRows(tx`copy copied (id, text, other) from stdin`, rows));

describe('rows for COPY', () => {
  // published: PostgreSQL 18 documentation, COPY, text format: what stands for which character.
  it('come back as they were, whatever characters they hold', async () => {
    const texts = ['a\tb', 'line\r\nline', '\\N', '\\', 'é𝄞', '', '\b\f\v', '\\x41', '\\.'];
    await copy(texts.map((text, index) => copyRow([String(index), text, null])).join(''));
    const rows = await database.sql`select text from copied order by id`;
    expect(rows.map(({ text }) => text)).toEqual(texts);
    expect(copyRow([null])).toBe('\\N\n');
  });

  it('that PostgreSQL refuses after the last one fail with its own state', async () => {
    const refused = async (rows: string) => {
      try {
        await copy(rows);
      } catch (error) {
        return sqlState(error);
      }
      return 'taken';
    };
    // published: PostgreSQL 18 documentation, appendix A: the codes of these conditions.
    expect(await refused('100\ta\t999\n')).toBe('23503');
    expect(await refused('0\ttwice\t\\N\n')).toBe('23505');
    expect(await refused('x\ta\t\\N\n')).toBe('22P02');
    expect(await refused('101\ta\t101\n')).toBe('taken');
    const [row] = await database.sql`select count(*)::int as count from copied where id >= 100`;
    expect(row?.count).toBe(1);
  });
});
