import { KEY_PATTERN, type Measure } from '#core/protocol/protocol.ts';
import type { TrialRules } from './trial-rules.ts';
import { momentOf } from './trial-time.ts';
import { pointerToken, type RowFault, type TrialFields } from './upload-row.ts';

/** What a check needs to know of the participant. */
export interface TrialOwner {
  /** Condition keys by period, as assigned. */
  readonly sequence: readonly string[];
  /** Of somebody who withdrew; null of everybody else. */
  readonly periodReached: number | null;
}

/** A record that may be stored, with what is remarkable about it. */
export interface CheckedTrial {
  readonly faults: readonly RowFault[];
  /** The condition presented is not the one assigned. */
  readonly deviation: boolean;
  /** `out-of-range:<measure>` in protocol order, `period-not-reached`. */
  readonly flags: readonly string[];
  /** As stored: of a binary measure true or false, of any other a number. */
  readonly values: ReadonlyMap<string, number | boolean>;
  readonly missing: ReadonlyMap<string, string>;
}

const REASON_CODE_MAX = 40;

/**
 * Compares a record with the protocol version under which its participant was allocated, and
 * gathers every fault. What is implausible is no fault but flagged, for the exclusion rules to
 * decide on; so is a period after the last one that a withdrawn participant is said to have begun.
 */
export function checkTrial(
  fields: TrialFields,
  owner: TrialOwner,
  rules: TrialRules,
): CheckedTrial {
  const faults: RowFault[] = [];
  placeFaults(fields, rules, faults);
  timeFaults(fields, faults);
  const flags: string[] = [];
  const values = new Map<string, number | boolean>();
  const expected = fields.repetition === 1 ? rules.expectedFirst : rules.expectedLater;
  let known = 0;
  for (const measure of expected) {
    const given = fields.values.get(measure.key);
    const reason = fields.missing.get(measure.key);
    if (given !== undefined) known += 1;
    if (reason !== undefined) known += 1;
    const fault = measureFault(measure, given, reason);
    if (fault !== null) {
      faults.push(fault);
    } else if (given !== undefined) {
      values.set(measure.key, measure.scale === 'binary' ? Boolean(given) : Number(given));
      if (isOutOfRange(measure, given)) flags.push(`out-of-range:${measure.key}`);
      const lacking = exposureFault(measure, fields, expected);
      if (lacking !== null) faults.push(lacking);
    }
  }
  if (known < fields.values.size + fields.missing.size) strangeFaults(fields, rules, faults);
  if (owner.periodReached !== null && fields.period > owner.periodReached) {
    flags.push('period-not-reached');
  }
  const deviation = owner.sequence[fields.period - 1] !== fields.condition;
  return { faults, deviation, flags, values, missing: fields.missing };
}

function placeFaults(fields: TrialFields, rules: TrialRules, faults: RowFault[]): void {
  if (fields.period > rules.periods) {
    const message = `The sequence has the periods 1 to ${rules.periods}.`;
    faults.push({ pointer: '/period', code: 'period-outside-sequence', message });
  }
  if (fields.repetition > rules.repetitions) {
    const message = `The protocol plans the repetitions 1 to ${rules.repetitions}.`;
    faults.push({ pointer: '/repetition', code: 'repetition-not-planned', message });
  }
  if (!rules.conditionKeys.has(fields.condition)) {
    const message = `The conditions are ${[...rules.conditionKeys].join(', ')}.`;
    faults.push({ pointer: '/condition', code: 'unknown-condition', message });
  }
}

function timeFaults({ startedAt, endedAt }: TrialFields, faults: RowFault[]): void {
  const message =
    'Expected a date and time of ISO 8601 with its offset: 2026-03-01T09:30:00+01:00.';
  const start = momentOf(startedAt);
  if (start === null) faults.push({ pointer: '/startedAt', code: 'not-a-time', message });
  if (endedAt === null) return;
  const end = momentOf(endedAt);
  if (end === null) {
    faults.push({ pointer: '/endedAt', code: 'not-a-time', message });
  } else if (start !== null && end < start) {
    const before = 'The end lies before the start.';
    faults.push({ pointer: '/endedAt', code: 'ended-before-started', message: before });
  }
}

function measureFault(
  measure: Measure,
  given: number | boolean | undefined,
  reason: string | undefined,
): RowFault | null {
  const { key } = measure;
  if (reason !== undefined && given !== undefined) {
    const message = 'There is a value and a reason why it is missing.';
    return { pointer: `/missing/${key}`, code: 'value-and-missing', message };
  }
  if (reason !== undefined) {
    if (reason.length <= REASON_CODE_MAX && KEY_PATTERN.test(reason)) return null;
    const message = 'A reason code is lower-case words joined by hyphens, such as not-taken.';
    return { pointer: `/missing/${key}`, code: 'not-a-reason-code', message };
  }
  if (given === undefined) {
    const message = 'The value must be given, or a reason code for why it is missing.';
    return { pointer: `/values/${key}`, code: 'value-needed', message };
  }
  const message = scaleFault(measure, given);
  return message === null ? null : { pointer: `/values/${key}`, code: 'not-of-the-scale', message };
}

/** What a value must be to be one of its measure's scale; null when it is. */
function scaleFault({ scale, points }: Measure, value: number | boolean): string | null {
  if (scale === 'binary') {
    if (value === true || value === false || value === 0 || value === 1) return null;
    return 'A binary measure is true, false, 1 or 0.';
  }
  if (typeof value === 'boolean') return `A measure that is ${scale} needs a number.`;
  switch (scale) {
    case 'continuous':
      return null;
    case 'time-like':
      return value > 0 ? null : 'A time-like measure lies above zero.';
    case 'count':
      if (Number.isSafeInteger(value) && value >= 0) return null;
      return 'A count is a whole number from 0.';
    case 'ordinal':
      if (points?.some((point) => point.value === value)) return null;
      return `The points are ${points?.map((point) => point.value).join(', ')}.`;
  }
}

function isOutOfRange({ scale, validRange }: Measure, value: number | boolean): boolean {
  if (validRange === null || scale === 'binary') return false;
  const { minimum, maximum } = validRange;
  return (
    (minimum !== null && Number(value) < minimum) || (maximum !== null && Number(value) > maximum)
  );
}

/** A count out of another measure needs it; one taken once a period stands in repetition 1. */
function exposureFault(
  { key, exposure }: Measure,
  fields: TrialFields,
  expected: readonly Measure[],
): RowFault | null {
  if (exposure === null || exposure.kind === 'constant') return null;
  if (fields.values.has(exposure.measure)) return null;
  if (!expected.some((measure) => measure.key === exposure.measure)) return null;
  const message = `The count ${key} is over ${exposure.measure}, whose value must be given too.`;
  return { pointer: `/values/${exposure.measure}`, code: 'exposure-needed', message };
}

/** Measures that the protocol has not, or not on this repetition. */
function strangeFaults(fields: TrialFields, rules: TrialRules, faults: RowFault[]): void {
  for (const part of ['values', 'missing'] as const) {
    for (const key of fields[part].keys()) {
      const measure = rules.measures.get(key);
      const pointer = `/${part}/${pointerToken(key)}`;
      if (measure === undefined) {
        const message = 'The protocol of the participant has no such measure.';
        faults.push({ pointer, code: 'unknown-measure', message });
      } else if (measure.taken === 'once-a-period' && fields.repetition !== 1) {
        const message = 'A measure taken once a period stands on repetition 1 alone.';
        faults.push({ pointer, code: 'taken-once-a-period', message });
      }
    }
  }
}
