import { rawRow, withoutCarriageReturn } from './raw-text.ts';
import { type RawRow, ROW_BYTES_MAX, type RowFault, type RowSplitter } from './upload-row.ts';

const QUOTE = 0x22;
const COMMA = 0x2c;
const LINE_FEED = 0x0a;

const UNCLOSED_QUOTE: RowFault = {
  pointer: '',
  code: 'unclosed-quote',
  message: 'A quoted field of this line is not closed.',
};

/**
 * Cuts CSV into records (RFC 4180): a line break inside a quoted field is part of it. Both CRLF and
 * a bare line feed end a record; blank lines are passed over. When a quote is never closed, only
 * its own line is given up, and reading goes on with the next.
 */
export function csvSplitter(): RowSplitter {
  let rest: Buffer = Buffer.alloc(0);
  let skipping = false;

  const take = (record: Buffer, rows: RawRow[], fault: RowFault | null = null): void => {
    const skipped = skipping;
    skipping = false;
    const bytes = withoutCarriageReturn(record);
    if (!skipped && bytes.length > 0) rows.push(rawRow(bytes, fault));
  };

  /** Gives every record that ends in `bytes`, and what is left after the last. */
  const cut = (bytes: Buffer, rows: RawRow[]): Buffer => {
    let start = 0;
    for (let end = recordEnd(bytes, start); end !== -1; end = recordEnd(bytes, start)) {
      take(bytes.subarray(start, end), rows);
      start = end + 1;
    }
    return bytes.subarray(start);
  };

  /** Gives up the first line of what never closes its quote; what follows is cut anew. */
  const giveUpLine = (bytes: Buffer, rows: RawRow[]): Buffer | null => {
    const end = bytes.indexOf(LINE_FEED);
    if (end === -1) return null;
    take(bytes.subarray(0, end), rows, UNCLOSED_QUOTE);
    return cut(bytes.subarray(end + 1), rows);
  };

  return {
    push(chunk) {
      const rows: RawRow[] = [];
      rest = cut(rest.length === 0 ? chunk : Buffer.concat([rest, chunk]), rows);
      while (rest.length > ROW_BYTES_MAX + 1) {
        const after = giveUpLine(rest, rows);
        if (after === null && !skipping) rows.push(rawRow(rest));
        if (after === null) skipping = true;
        rest = after ?? Buffer.alloc(0);
      }
      rest = Buffer.from(rest);
      return rows;
    },
    end() {
      const rows: RawRow[] = [];
      while (rest.length > 0 && quoteStaysOpen(rest)) {
        const after = giveUpLine(rest, rows);
        if (after === null) take(rest, rows, UNCLOSED_QUOTE);
        rest = after ?? Buffer.alloc(0);
      }
      if (rest.length > 0) take(rest, rows);
      return rows;
    },
  };
}

/** Index of the line feed that ends the record beginning at `start`; -1 when none does. */
function recordEnd(bytes: Buffer, start: number): number {
  return scanRecord(bytes, start).end;
}

function quoteStaysOpen(bytes: Buffer): boolean {
  return scanRecord(bytes, 0).open;
}

/** A quote opens a field only at its beginning, or right after one that closed: a doubled quote. */
function scanRecord(bytes: Buffer, start: number): { end: number; open: boolean } {
  let open = false;
  let mayOpen = true;
  for (let index = start; index < bytes.length; index += 1) {
    const byte = bytes[index];
    if (open) {
      if (byte !== QUOTE) continue;
      open = false;
      mayOpen = true;
    } else if (byte === QUOTE && mayOpen) {
      open = true;
    } else if (byte === LINE_FEED) {
      return { end: index, open };
    } else {
      mayOpen = byte === COMMA;
    }
  }
  return { end: -1, open };
}

/** The fields of one record, quotes taken off. */
export type CsvFields =
  | { readonly fields: readonly string[]; readonly fault: null }
  | { readonly fields: null; readonly fault: RowFault };

/**
 * Reads one record. Spaces belong to a field (RFC 4180 section 2, rule 4); quotes stand around a
 * whole field or not at all, and inside one they are doubled (rules 5 to 7).
 */
export function csvFields(record: string): CsvFields {
  if (!record.includes('"')) return { fields: record.split(','), fault: null };
  const fields: string[] = [];
  for (let place = 0; ; ) {
    const field = fieldAt(record, place);
    if (field === null) {
      const message = `The quotes of field ${fields.length + 1} are not as RFC 4180 has them.`;
      return { fields: null, fault: { pointer: '', code: 'malformed-quotes', message } };
    }
    fields.push(field.text);
    if (field.next > record.length) return { fields, fault: null };
    place = field.next;
  }
}

/** The field that begins at `start`, and where the next one does; beyond the end for the last. */
function fieldAt(record: string, start: number): { text: string; next: number } | null {
  if (record[start] !== '"') {
    const comma = record.indexOf(',', start);
    const end = comma === -1 ? record.length : comma;
    const text = record.slice(start, end);
    return text.includes('"') ? null : { text, next: end + 1 };
  }
  let text = '';
  for (let from = start + 1; ; ) {
    const quote = record.indexOf('"', from);
    if (quote === -1) return null;
    text += record.slice(from, quote);
    if (record[quote + 1] !== '"') {
      const isEnd = quote + 1 === record.length || record[quote + 1] === ',';
      return isEnd ? { text, next: quote + 2 } : null;
    }
    text += '"';
    from = quote + 2;
  }
}
