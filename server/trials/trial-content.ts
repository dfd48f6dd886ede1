import { hash, randomFillSync } from 'node:crypto';
import type { CheckedTrial } from './check-trial.ts';
import type { TrialRules } from './trial-rules.ts';
import type { RowFault, TrialFields } from './upload-row.ts';

/**
 * What the erasable half of a trial holds, and its commitment covers: everything that was recorded.
 * Times stay as they came, with their offset.
 */
export interface TrialContent {
  readonly condition: string;
  readonly endedAt: string | null;
  readonly missing: { readonly [measure: string]: string };
  readonly note: string | null;
  readonly period: number;
  readonly recordId: string;
  readonly repetition: number;
  readonly startedAt: string;
  readonly values: { readonly [measure: string]: number | boolean };
}

/**
 * The canonical text of a record: equal for equal records, and what the core's `canonicalJson`
 * gives for the same `TrialContent`. It is written out here because an upload makes one a row: the
 * members are in the order of their names, the measures in that of `keysInOrder`, and keys and
 * condition, which match the protocol's pattern, need no escape.
 */
export function contentText(
  fields: TrialFields,
  { missing, values }: CheckedTrial,
  { keysInOrder }: TrialRules,
): string {
  const { condition, endedAt, note, period, recordId, repetition, startedAt } = fields;
  let missingText = '';
  let valuesText = '';
  for (const key of keysInOrder) {
    const value = values.get(key);
    const reason = missing.get(key);
    if (value !== undefined) valuesText += `${valuesText === '' ? '' : ','}"${key}":${value}`;
    if (reason !== undefined) missingText += `${missingText === '' ? '' : ','}"${key}":"${reason}"`;
  }
  return (
    `{"condition":"${condition}","endedAt":${endedAt === null ? 'null' : `"${endedAt}"`},` +
    `"missing":{${missingText}},"note":${note === null ? 'null' : JSON.stringify(note)},` +
    `"period":${period},"recordId":${JSON.stringify(recordId)},"repetition":${repetition},` +
    `"startedAt":"${startedAt}","values":{${valuesText}}}`
  );
}

/** Reads back what `contentText` wrote. */
export function parseContent(text: string): TrialContent {
  const content: TrialContent = JSON.parse(text);
  return content;
}

export interface Salted {
  /** 16 bytes, hexadecimal. */
  readonly salt: string;
  /** As `saltedCommitment` of the core gives it for the same value; hexadecimal. */
  readonly commitment: string;
}

const SALT_BYTES = 16;

/** Salts are drawn many at a time, which is far cheaper; each is given once. */
const drawn = Buffer.alloc(256 * SALT_BYTES);
let nextSalt = drawn.length;

/** Where salt and text are put together for hashing; grows to the longest text. */
let scratch = Buffer.alloc(65_536);

/**
 * A fresh salt, and the commitment to a canonical text with it. The same bytes as the core's
 * `saltedCommitment`, by the runtime's own SHA-256, which is many times faster: an upload makes one
 * a row.
 */
export function saltContent(text: string): Salted {
  if (nextSalt === drawn.length) {
    randomFillSync(drawn);
    nextSalt = 0;
  }
  const bytesMax = SALT_BYTES + 3 * text.length;
  if (scratch.length < bytesMax) scratch = Buffer.alloc(bytesMax);
  drawn.copy(scratch, 0, nextSalt, nextSalt + SALT_BYTES);
  nextSalt += SALT_BYTES;
  const end = SALT_BYTES + scratch.write(text, SALT_BYTES);
  return {
    salt: scratch.toString('hex', 0, SALT_BYTES),
    commitment: hash('sha256', scratch.subarray(0, end)),
  };
}

/** One fault for each field in which a row differs from the record that is stored. */
export function differences(stored: TrialContent, row: TrialContent): RowFault[] {
  const message = 'Another value is stored for this record; a correction is its own operation.';
  const differing = (pointer: string): RowFault => ({
    pointer,
    code: 'differs-from-stored',
    message,
  });
  const faults: RowFault[] = [];
  for (const name of ['condition', 'recordId', 'startedAt', 'endedAt', 'note'] as const) {
    if (stored[name] !== row[name]) faults.push(differing(`/${name}`));
  }
  for (const part of ['values', 'missing'] as const) {
    const keys = new Set([...Object.keys(stored[part]), ...Object.keys(row[part])]);
    for (const key of [...keys].sort()) {
      const before = Object.hasOwn(stored[part], key) ? stored[part][key] : null;
      const after = Object.hasOwn(row[part], key) ? row[part][key] : null;
      if (before !== after) faults.push(differing(`/${part}/${key}`));
    }
  }
  return faults;
}
