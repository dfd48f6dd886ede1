import { hash, randomFillSync } from 'node:crypto';
import { canonicalJson } from '#core/hashing/canonical-json.ts';
import type { CheckedTrial } from './check-trial.ts';
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

/** The canonical text of a record: equal for equal records. */
export function contentText(fields: TrialFields, checked: CheckedTrial): string {
  const { condition, endedAt, note, period, recordId, repetition, startedAt } = fields;
  const { missing, values } = checked;
  return canonicalJson({
    condition,
    endedAt,
    missing,
    note,
    period,
    recordId,
    repetition,
    startedAt,
    values,
  });
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

/**
 * A fresh salt, and the commitment to a canonical text with it. The same bytes as the core's
 * `saltedCommitment`, by the runtime's own SHA-256, which is many times faster: an upload makes one
 * a row.
 */
export function saltContent(text: string): Salted {
  const bytes = Buffer.allocUnsafe(SALT_BYTES + Buffer.byteLength(text));
  randomFillSync(bytes, 0, SALT_BYTES);
  bytes.write(text, SALT_BYTES);
  return { salt: bytes.toString('hex', 0, SALT_BYTES), commitment: hash('sha256', bytes) };
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
