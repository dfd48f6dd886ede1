import { type Fault, ProblemError } from '#platform/problems.ts';
import { FIELD_NAMES, type LooseRow, REQUIRED_FIELDS, readFields } from './read-fields.ts';
import { csvFields } from './split-csv.ts';
import { pointerToken, type RawRow, type RowFault, type UploadRow } from './upload-row.ts';

/** What a column of the header holds. */
interface Column {
  readonly kind: 'text' | 'whole-number' | 'value' | 'missing';
  /** Of the field, or key of the measure. */
  readonly name: string;
}

const MISSING_PREFIX = 'missing.';
const WHOLE_NUMBER = /^\d{1,15}$/;
const NUMBER = /^[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d{1,3})?$/;

/**
 * Reads CSV rows under a header: the columns participant, period, repetition, condition, recordId,
 * startedAt, and if wanted endedAt, note, one a measure, and `missing.` with a measure's key for
 * why its value is missing. An empty field is one that was not given.
 *
 * @param measures every measure of the study's protocol versions
 * @throws {ProblemError} `invalid-request`, naming every column that is unknown, double or absent
 */
export function csvRowReader(header: RawRow, measures: ReadonlySet<string>) {
  const columns = columnsOf(header, measures);
  return (raw: RawRow, number: number): UploadRow => {
    const read = raw.fault === null ? csvFields(raw.text) : { fields: null, fault: raw.fault };
    if (read.fields === null) return refused(raw, number, [read.fault]);
    if (read.fields.length !== columns.length) {
      const received = read.fields.length;
      const message = `Expected ${columns.length} fields as in the header, got ${received}.`;
      return refused(raw, number, [{ pointer: '', code: 'wrong-field-count', message }]);
    }
    return { number, text: raw.text, ...readRecord(columns, read.fields) };
  };
}

function refused(raw: RawRow, number: number, faults: readonly RowFault[]): UploadRow {
  return { number, text: raw.text, participant: null, fields: null, faults };
}

function readRecord(columns: readonly Column[], fields: readonly string[]) {
  const row: Record<string, unknown> = {};
  const values: Record<string, unknown> = {};
  const missing: Record<string, unknown> = {};
  const faults: RowFault[] = [];
  for (const [index, column] of columns.entries()) {
    const text = fields[index] ?? '';
    if (text === '') continue;
    if (column.kind === 'text') row[column.name] = text;
    else if (column.kind === 'whole-number') {
      row[column.name] = WHOLE_NUMBER.test(text) ? Number(text) : Number.NaN;
    } else if (column.kind === 'missing') missing[column.name] = text;
    else {
      const value = valueIn(text);
      if (value === null) faults.push(unreadableValue(column.name));
      else values[column.name] = value;
    }
  }
  const loose: LooseRow = { ...row, values, missing };
  const read = readFields(loose);
  if (faults.length === 0) return read;
  return { participant: read.participant, fields: null, faults: [...faults, ...read.faults] };
}

function valueIn(text: string): number | boolean | null {
  if (text === 'true' || text === 'false') return text === 'true';
  if (!NUMBER.test(text)) return null;
  const value = Number(text);
  return Number.isFinite(value) ? value : null;
}

function unreadableValue(measure: string): RowFault {
  return {
    pointer: `/values/${pointerToken(measure)}`,
    code: 'wrong-type',
    message: 'Expected a number with a decimal point, true or false.',
  };
}

function columnsOf(header: RawRow, measures: ReadonlySet<string>): Column[] {
  const read =
    header.fault === null ? csvFields(header.text) : { fields: null, fault: header.fault };
  if (read.fields === null) throw wrongHeader([{ ...read.fault, pointer: '/header' }]);
  const faults: Fault[] = [];
  const columns: Column[] = [];
  for (const [index, name] of read.fields.entries()) {
    const column = columnOf(name, measures);
    const pointer = `/header/${index}`;
    if (read.fields.indexOf(name) < index) {
      faults.push({ pointer, code: 'double-column', message: 'This column stands there twice.' });
    } else if (column === null) {
      const message = `Column ${index + 1} is neither a field of a trial nor a measure.`;
      faults.push({ pointer, code: 'unknown-column', message });
    } else columns.push(column);
  }
  for (const name of REQUIRED_FIELDS) {
    if (read.fields.includes(name)) continue;
    const message = `The column ${name} is needed; fields are separated by commas.`;
    faults.push({ pointer: '/header', code: 'column-needed', message, expected: name });
  }
  if (faults.length > 0) throw wrongHeader(faults);
  return columns;
}

function columnOf(name: string, measures: ReadonlySet<string>): Column | null {
  if (name === 'period' || name === 'repetition') return { kind: 'whole-number', name };
  if (FIELD_NAMES.some((field) => field === name)) return { kind: 'text', name };
  if (measures.has(name)) return { kind: 'value', name };
  const measure = name.startsWith(MISSING_PREFIX) ? name.slice(MISSING_PREFIX.length) : '';
  return measures.has(measure) ? { kind: 'missing', name: measure } : null;
}

function wrongHeader(faults: readonly Fault[]): ProblemError {
  return new ProblemError('invalid-request', 'The first line of the CSV must name its columns.', {
    faults,
  });
}

/** A body without even a header. */
export function noHeader(): ProblemError {
  return wrongHeader([
    {
      pointer: '/header',
      code: 'column-needed',
      message: `The body is empty. Columns needed: ${REQUIRED_FIELDS.join(', ')}.`,
    },
  ]);
}
