import { rawRow, withoutCarriageReturn } from './raw-text.ts';
import { type RawRow, ROW_BYTES_MAX, type RowSplitter } from './upload-row.ts';

const LINE_FEED = 0x0a;

/**
 * Cuts newline-delimited JSON into lines. A carriage return before the line feed, a missing line
 * feed at the end and blank lines are passed over.
 */
export function lineSplitter(): RowSplitter {
  let rest: Buffer = Buffer.alloc(0);
  /** A line that is too long was given already, up to what is kept of it. */
  let skipping = false;

  const take = (line: Buffer, rows: RawRow[]): void => {
    const skipped = skipping;
    skipping = false;
    const text = withoutCarriageReturn(line);
    if (!skipped && !isBlank(text)) rows.push(rawRow(text));
  };

  return {
    push(chunk) {
      const rows: RawRow[] = [];
      const bytes = rest.length === 0 ? chunk : Buffer.concat([rest, chunk]);
      let start = 0;
      for (let end = bytes.indexOf(LINE_FEED); end !== -1; end = bytes.indexOf(LINE_FEED, start)) {
        take(bytes.subarray(start, end), rows);
        start = end + 1;
      }
      rest = Buffer.from(bytes.subarray(start));
      if (rest.length > ROW_BYTES_MAX + 1) {
        if (!skipping) rows.push(rawRow(rest));
        skipping = true;
        rest = Buffer.alloc(0);
      }
      return rows;
    },
    end() {
      const rows: RawRow[] = [];
      if (rest.length > 0) take(rest, rows);
      return rows;
    },
  };
}

function isBlank(bytes: Buffer): boolean {
  return bytes.every((byte) => byte === 0x20 || byte === 0x09);
}
