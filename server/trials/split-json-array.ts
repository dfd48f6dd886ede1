import { ProblemError } from '#platform/problems.ts';
import { rawRow } from './raw-text.ts';
import { type RawRow, ROW_BYTES_MAX, type RowSplitter } from './upload-row.ts';

const QUOTE = 0x22;
const COMMA = 0x2c;
const OPEN_BRACKET = 0x5b;
const BACKSLASH = 0x5c;
const CLOSE_BRACKET = 0x5d;
const OPEN_BRACE = 0x7b;
const CLOSE_BRACE = 0x7d;

/**
 * Cuts a JSON array into the texts of its elements without reading them: what stands between the
 * brackets and commas of the array itself. An element that is no JSON spoils no other, as long as
 * its own brackets and quotes close.
 *
 * @throws {ProblemError} `invalid-request` when the body is not one array that ends
 */
export function jsonArraySplitter(): RowSplitter {
  return new JsonArraySplitter();
}

class JsonArraySplitter implements RowSplitter {
  #place: 'before' | 'inside' | 'after' = 'before';
  #elements = 0;
  #depth = 0;
  #inString = false;
  #escaped = false;
  /** What came of the element at hand in earlier chunks, at most a little over the longest row. */
  #rest: Buffer[] = [];
  #restLength = 0;

  push(chunk: Buffer): RawRow[] {
    const rows: RawRow[] = [];
    let start = 0;
    for (let index = 0; index < chunk.length; index += 1) {
      const byte = chunk[index] ?? 0;
      if (this.#place === 'inside') {
        if (!this.#ends(byte)) continue;
        this.#take(chunk.subarray(start, index), byte, rows);
      } else if (!isWhiteSpace(byte)) {
        if (this.#place === 'after' || byte !== OPEN_BRACKET) throw notOneArray();
        this.#place = 'inside';
      }
      start = index + 1;
    }
    if (this.#place === 'inside') this.#keep(chunk.subarray(start));
    return rows;
  }

  end(): RawRow[] {
    if (this.#place === 'after') return [];
    if (this.#place === 'before') throw notOneArray();
    throw new ProblemError('invalid-request', 'The array of the body does not end.', {
      faults: [
        {
          pointer: '',
          code: 'array-not-ended',
          message: 'A quote or bracket opened in this row or after it is not closed.',
          row: this.#elements + 1,
        },
      ],
    });
  }

  /** Whether a byte inside the array ends the element at hand. */
  #ends(byte: number): boolean {
    if (this.#inString) {
      if (this.#escaped) this.#escaped = false;
      else if (byte === BACKSLASH) this.#escaped = true;
      else if (byte === QUOTE) this.#inString = false;
      return false;
    }
    if (byte === QUOTE) this.#inString = true;
    else if (byte === OPEN_BRACE || byte === OPEN_BRACKET) this.#depth += 1;
    else if (this.#depth === 0) return byte === COMMA || byte === CLOSE_BRACKET;
    else if (byte === CLOSE_BRACE || byte === CLOSE_BRACKET) this.#depth -= 1;
    return false;
  }

  #take(lastPart: Buffer, delimiter: number, rows: RawRow[]): void {
    const element = trimmed(
      this.#rest.length === 0 ? lastPart : Buffer.concat([...this.#rest, lastPart]),
    );
    this.#rest = [];
    this.#restLength = 0;
    const isEmptyArray =
      delimiter === CLOSE_BRACKET && this.#elements === 0 && element.length === 0;
    if (delimiter === CLOSE_BRACKET) this.#place = 'after';
    if (isEmptyArray) return;
    this.#elements += 1;
    rows.push(rawRow(element));
  }

  #keep(part: Buffer): void {
    if (part.length === 0 || this.#restLength > ROW_BYTES_MAX) return;
    this.#rest.push(Buffer.from(part));
    this.#restLength += part.length;
  }
}

function trimmed(bytes: Buffer): Buffer {
  let start = 0;
  let end = bytes.length;
  while (start < end && isWhiteSpace(bytes[start] ?? 0)) start += 1;
  while (end > start && isWhiteSpace(bytes[end - 1] ?? 0)) end -= 1;
  return bytes.subarray(start, end);
}

/** White space as RFC 8259 section 2 has it. */
function isWhiteSpace(byte: number): boolean {
  return byte === 0x20 || byte === 0x0a || byte === 0x0d || byte === 0x09;
}

function notOneArray(): ProblemError {
  return new ProblemError('invalid-request', 'The body must be one JSON array of rows.', {
    faults: [{ pointer: '', code: 'not-an-array', message: 'Expected one array of rows.' }],
  });
}
