import { isUtf8 } from 'node:buffer';
import { type RawRow, ROW_BYTES_MAX, ROW_TOO_LONG, type RowFault } from './upload-row.ts';

const NOT_UTF8: RowFault = {
  pointer: '',
  code: 'not-utf-8',
  message: 'The row is not UTF-8; it was kept as if it were ISO 8859-1.',
};

/** The row that these bytes are, cut off where it is too long. */
export function rawRow(bytes: Buffer, fault: RowFault | null = null): RawRow {
  if (bytes.length > ROW_BYTES_MAX) {
    return { text: bytes.toString('latin1', 0, ROW_BYTES_MAX), fault: ROW_TOO_LONG };
  }
  if (isUtf8(bytes)) return { text: bytes.toString('utf8'), fault };
  return { text: bytes.toString('latin1'), fault: NOT_UTF8 };
}

/** The same bytes without a carriage return at their end. */
export function withoutCarriageReturn(bytes: Buffer): Buffer {
  return bytes.at(-1) === 0x0d ? bytes.subarray(0, -1) : bytes;
}
