import { readFields } from './read-fields.ts';
import type { RawRow, RowFault, UploadRow } from './upload-row.ts';

const MALFORMED: RowFault = {
  pointer: '',
  code: 'malformed-json',
  message: 'The row is not JSON.',
};
const NOT_AN_OBJECT: RowFault = {
  pointer: '',
  code: 'not-an-object',
  message: 'The row is JSON, but no object.',
};

/** A row of a JSON array or of newline-delimited JSON. */
export function readJsonRow(raw: RawRow, number: number): UploadRow {
  const refused = (fault: RowFault): UploadRow => ({
    number,
    text: raw.text,
    participant: null,
    fields: null,
    faults: [fault],
  });
  if (raw.fault !== null) return refused(raw.fault);
  let row: unknown;
  try {
    row = JSON.parse(raw.text);
  } catch {
    return refused(MALFORMED);
  }
  if (row === null || typeof row !== 'object' || Array.isArray(row)) return refused(NOT_AN_OBJECT);
  return { number, text: raw.text, ...readFields({ ...row }) };
}
