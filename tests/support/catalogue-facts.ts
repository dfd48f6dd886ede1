import type postgres from 'postgres';
import type { SchemaFacts } from './prisma-schema.ts';

const ACTIONS: Readonly<Record<string, string>> = {
  a: 'no action',
  r: 'restrict',
  c: 'cascade',
  n: 'set null',
  d: 'set default',
};

/**
 * What PostgreSQL's own catalogue says of the tables in the schema `public`, in the words of
 * `factsOfPrismaSchema`. Left out, because a Prisma schema cannot say them: the bookkeeping of
 * migrations, whether a list may be null, indexes over part of a table, check constraints, triggers
 * and functions.
 */
export async function factsOfCatalogue(sql: postgres.Sql): Promise<SchemaFacts> {
  const columns = await sql<{ fact: string }[]>`
    select c.relname || '.' || a.attname || ': ' || format_type(a.atttypid, a.atttypmod)
      || case when a.attndims > 0 then '' when a.attnotnull then ', not null' else ', null' end
      || coalesce(', default ' || pg_get_expr(d.adbin, d.adrelid), '')
      || case when a.attidentity <> '' or a.attgenerated <> '' then ', generated' else '' end
      as fact
    from pg_class c
      join pg_attribute a on a.attrelid = c.oid and a.attnum > 0 and not a.attisdropped
      left join pg_attrdef d on d.adrelid = c.oid and d.adnum = a.attnum
    where c.relnamespace = 'public'::regnamespace and c.relkind in ('r', 'p', 'v', 'm', 'f')
      and c.relname <> '_prisma_migrations'`;
  const indexes = await sql<{ fact: string }[]>`
    select c.relname || ': '
      || case when i.indisprimary then 'primary key'
        when i.indisunique then 'unique' else 'index' end
      || ' (' || (
        select string_agg(replace(pg_get_indexdef(i.indexrelid, n, true), '"', ''), ', ' order by n)
        from generate_series(1, i.indnkeyatts) n
      ) || ')' as fact
    from pg_index i join pg_class c on c.oid = i.indrelid
    where c.relnamespace = 'public'::regnamespace and i.indpred is null and i.indisvalid
      and c.relname <> '_prisma_migrations'`;
  const foreignKeys = await sql<
    { from: string; columns: string; to: string; keys: string; deleted: string; updated: string }[]
  >`
    select c.relname as from, t.relname as to, k.confdeltype as deleted, k.confupdtype as updated,
      (select string_agg(a.attname, ', ' order by n.place) from unnest(k.conkey)
        with ordinality n(number, place)
        join pg_attribute a on a.attrelid = k.conrelid and a.attnum = n.number) as columns,
      (select string_agg(a.attname, ', ' order by n.place) from unnest(k.confkey)
        with ordinality n(number, place)
        join pg_attribute a on a.attrelid = k.confrelid and a.attnum = n.number) as keys
    from pg_constraint k
      join pg_class c on c.oid = k.conrelid
      join pg_class t on t.oid = k.confrelid
    where k.contype = 'f' and c.relnamespace = 'public'::regnamespace and k.convalidated`;
  return [
    ...columns.map(({ fact }) => fact),
    ...indexes.map(({ fact }) => fact),
    ...foreignKeys.map(
      (key) =>
        `${key.from}: foreign key (${key.columns}) to ${key.to} (${key.keys}), ` +
        `on delete ${ACTIONS[key.deleted]}, on update ${ACTIONS[key.updated]}`,
    ),
  ].sort();
}
