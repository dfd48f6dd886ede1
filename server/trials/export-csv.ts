import type { ExportedTrial } from './schemas.ts';

/** Columns before the measures, as an upload has them. */
const BEFORE = [
  'participant',
  'period',
  'repetition',
  'condition',
  'recordId',
  'startedAt',
  'endedAt',
  'note',
] as const satisfies readonly (keyof ExportedTrial)[];

/** Columns after the measures and their reason codes. */
const AFTER = [
  'trialId',
  'participantId',
  'siteId',
  'stratum',
  'slotNumber',
  'protocolVersion',
  'assignedCondition',
  'deviation',
  'flags',
  'version',
  'current',
  'erased',
  'uploadId',
  'receivedAt',
] as const satisfies readonly (keyof ExportedTrial)[];

/** The header of an export as CSV: first the columns that an upload would have. */
export function csvHeader(measures: readonly string[]): string {
  const reasons = measures.map((measure) => `missing.${measure}`);
  return csvRecord([...BEFORE, ...measures, ...reasons, ...AFTER]);
}

export function csvLine(trial: ExportedTrial, measures: readonly string[]): string {
  const own = <Value>(of: Readonly<Record<string, Value>>, measure: string): Value | null =>
    Object.hasOwn(of, measure) ? (of[measure] ?? null) : null;
  return csvRecord([
    ...BEFORE.map((column) => trial[column]),
    ...measures.map((measure) => own(trial.values, measure)),
    ...measures.map((measure) => own(trial.missing, measure)),
    ...AFTER.map((column) => (column === 'flags' ? trial.flags.join(' ') : trial[column])),
  ]);
}

/** One record of RFC 4180, ended by CRLF; null is an empty field. */
function csvRecord(fields: readonly (string | number | boolean | null)[]): string {
  return `${fields.map(csvField).join(',')}\r\n`;
}

function csvField(value: string | number | boolean | null): string {
  const text = value === null ? '' : String(value);
  return /[",\r\n]/.test(text) ? `"${text.replaceAll('"', '""')}"` : text;
}
