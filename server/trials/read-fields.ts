import { isStorable } from '#platform/text.ts';
import type { RowFault, TrialFields } from './upload-row.ts';
import { pointerToken } from './upload-row.ts';

/** The fields of a row that are texts or numbers by themselves, in the order of the columns. */
export const FIELD_NAMES = [
  'participant',
  'period',
  'repetition',
  'condition',
  'recordId',
  'startedAt',
  'endedAt',
  'note',
] as const;

/** A row must have these, and an upload of CSV their columns. */
export const REQUIRED_FIELDS = [
  'participant',
  'period',
  'repetition',
  'condition',
  'recordId',
  'startedAt',
] as const satisfies readonly (typeof FIELD_NAMES)[number][];

export const RECORD_ID_MAX = 200;
export const NOTE_MAX = 2000;
const CODE_MAX = 200;

/** A row as it came: what it holds is of any type. */
export interface LooseRow {
  readonly [field: string]: unknown;
}

export interface ReadFields {
  readonly participant: string | null;
  readonly fields: TrialFields | null;
  readonly faults: readonly RowFault[];
}

const KNOWN_FIELDS: ReadonlySet<string> = new Set([...FIELD_NAMES, 'values', 'missing']);

/**
 * Checks the types of a row's fields and gathers every fault. What the protocol has to say to them
 * is the matter of `checkTrial`.
 */
export function readFields(row: LooseRow): ReadFields {
  const faults: RowFault[] = [];
  for (const name of Object.keys(row)) {
    if (KNOWN_FIELDS.has(name)) continue;
    faults.push(fault(`/${pointerToken(name)}`, 'unknown-field', 'There is no such field.'));
  }
  const participant = requiredText(row, 'participant', CODE_MAX, faults);
  const period = placeNumber(row, 'period', faults);
  const repetition = placeNumber(row, 'repetition', faults);
  const condition = requiredText(row, 'condition', CODE_MAX, faults);
  const recordId = requiredText(row, 'recordId', RECORD_ID_MAX, faults);
  const startedAt = requiredText(row, 'startedAt', CODE_MAX, faults);
  const endedAt = optionalText(row, 'endedAt', CODE_MAX, faults);
  const note = optionalText(row, 'note', NOTE_MAX, faults);
  const values = measureMap(row, 'values', isValue, 'Expected a number, true or false.', faults);
  const missing = measureMap(row, 'missing', isText, 'Expected a reason code.', faults);
  if (
    faults.length > 0 ||
    participant === null ||
    period === null ||
    repetition === null ||
    condition === null ||
    recordId === null ||
    startedAt === null
  ) {
    return { participant, fields: null, faults };
  }
  const fields: TrialFields = {
    participant,
    period,
    repetition,
    condition,
    recordId,
    values,
    missing,
    startedAt,
    endedAt,
    note,
  };
  return { participant, fields, faults };
}

function requiredText(
  row: LooseRow,
  name: (typeof REQUIRED_FIELDS)[number],
  max: number,
  faults: RowFault[],
): string | null {
  const value = row[name];
  if (typeof value === 'string' && value !== '' && value.length <= max && isStorable(value)) {
    return value;
  }
  faults.push(
    value === undefined || value === null || value === ''
      ? fault(`/${name}`, 'required', 'This field must be given.')
      : textFault(`/${name}`, max),
  );
  return null;
}

function optionalText(
  row: LooseRow,
  name: 'endedAt' | 'note',
  max: number,
  faults: RowFault[],
): string | null {
  const value = row[name];
  if (value === undefined || value === null || value === '') return null;
  if (typeof value === 'string' && value.length <= max && isStorable(value)) return value;
  faults.push(textFault(`/${name}`, max));
  return null;
}

function textFault(pointer: string, max: number): RowFault {
  const message = `Expected text of 1 to ${max} characters, without NUL or half a surrogate pair.`;
  return fault(pointer, 'not-a-text', message);
}

function placeNumber(
  row: LooseRow,
  name: 'period' | 'repetition',
  faults: RowFault[],
): number | null {
  const value = row[name];
  if (typeof value === 'number' && Number.isSafeInteger(value) && value >= 1) return value;
  faults.push(
    value === undefined || value === null
      ? fault(`/${name}`, 'required', 'This field must be given.')
      : fault(`/${name}`, 'not-a-whole-number', 'Expected a whole number from 1.'),
  );
  return null;
}

function measureMap<Value>(
  row: LooseRow,
  name: 'values' | 'missing',
  isOne: (value: unknown) => value is Value,
  expected: string,
  faults: RowFault[],
): Map<string, Value> {
  const found = new Map<string, Value>();
  const given = row[name];
  if (given === undefined || given === null) return found;
  if (typeof given !== 'object' || Array.isArray(given)) {
    faults.push(fault(`/${name}`, 'not-an-object', 'Expected an object with measure keys.'));
    return found;
  }
  for (const [measure, value] of Object.entries(given)) {
    if (value === undefined || value === null) continue;
    if (isOne(value)) found.set(measure, value);
    else faults.push(fault(`/${name}/${pointerToken(measure)}`, 'wrong-type', expected));
  }
  return found;
}

/** JSON writes numbers beyond what a double holds too; they are read as infinite. */
function isValue(value: unknown): value is number | boolean {
  return typeof value === 'boolean' || (typeof value === 'number' && Number.isFinite(value));
}

function isText(value: unknown): value is string {
  return typeof value === 'string';
}

function fault(pointer: string, code: string, message: string): RowFault {
  return { pointer, code, message };
}
