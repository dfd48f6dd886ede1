import { z } from 'zod';
import { ProblemError } from './problems.ts';

/** Query of every list: how many, and the cursor that the page before gave. */
export const PageQuery = z.strictObject({
  limit: z.coerce.number().int().min(1).max(500).default(100),
  cursor: z.string().max(200).optional(),
});
export type PageQuery = z.infer<typeof PageQuery>;

/** The shape of a page of items: `nextCursor` is null on the last one. */
export function pageOf<Item extends z.ZodType>(item: Item) {
  return z.strictObject({ items: z.array(item), nextCursor: z.string().nullable() });
}

/**
 * Cuts a page out of one row more than the page holds: the extra row only tells that there is more.
 * `position` is what the next query continues after.
 */
export function cutPage<Row, Item>(
  rows: readonly Row[],
  limit: number,
  position: (row: Row) => string,
  item: (row: Row) => Item,
): { items: Item[]; nextCursor: string | null } {
  const kept = rows.slice(0, limit);
  const last = kept.at(-1);
  const more = rows.length > limit && last !== undefined;
  return { items: kept.map(item), nextCursor: more ? encodeCursor(position(last)) : null };
}

/** Cursors are opaque to clients: base64url of the position. */
export function encodeCursor(position: string): string {
  return Buffer.from(position, 'utf8').toString('base64url');
}

/**
 * @throws {ProblemError} `invalid-request` when the cursor is none of ours
 */
export function decodeCursor(cursor: string | undefined, pattern: RegExp): string | null {
  if (cursor === undefined) return null;
  const position = Buffer.from(cursor, 'base64url').toString('utf8');
  if (pattern.test(position)) return position;
  throw new ProblemError('invalid-request', 'The cursor is none that this list gave.', {
    faults: [{ pointer: '/query/cursor', code: 'cursor', message: 'Not a cursor of this list.' }],
  });
}

export const UUID_POSITION = /^[0-9a-f]{8}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{4}-[0-9a-f]{12}$/;
export const NUMBER_POSITION = /^\d{1,18}$/;
