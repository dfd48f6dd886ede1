import { DomainError } from '../errors.ts';

/** A number with an optional decimal fraction, which ISO 8601 allows after a point or a comma. */
const NUMBER = String.raw`\d+(?:[.,]\d+)?`;

const DAYS = `(?:(?<weeks>${NUMBER})W)?(?:(?<days>${NUMBER})D)?`;
const HOURS = `(?:(?<hours>${NUMBER})H)?`;
const MINUTES = `(?:(?<minutes>${NUMBER})M)?`;
const SECONDS = `(?:(?<seconds>${NUMBER})S)?`;

/** At least one component after P, and after T if there is a T. */
const DURATION = new RegExp(`^P(?!$)${DAYS}(?:T(?!$)${HOURS}${MINUTES}${SECONDS})?$`);

const MILLISECONDS = {
  weeks: 604_800_000,
  days: 86_400_000,
  hours: 3_600_000,
  minutes: 60_000,
  seconds: 1000,
} as const;

/** About 273 years; keeps a time plus a duration within what a date can hold. */
const DURATION_MS_MAX = 100_000 * MILLISECONDS.days;

/**
 * The length of an ISO 8601 duration in milliseconds. Days are 24 hours and weeks 7 days, with no
 * regard to a calendar or to summer time: a washout is rest, not a date.
 * Source: ISO 8601-1:2019, 5.5.2 (weeks may stand beside the other components; only the smallest
 * component may have a fraction).
 *
 * @param text such as `P7D`, `PT30M`, `P1DT12H`, `PT1.5H`, `P2W`
 * @returns whole milliseconds, 0 or more
 * @throws {DomainError} when the text is not such a duration; when it has years or months, whose
 *   length is not fixed; when a component but the last has a fraction; above 100,000 days
 */
export function parseDuration(text: string): number {
  if (/^P[^T]*\d[YM]/.test(text)) {
    throw new DomainError(
      `"${text}" has years or months, which have no fixed length: write weeks, days or hours`,
    );
  }
  const groups = DURATION.exec(text)?.groups;
  if (groups === undefined) {
    throw new DomainError(`"${text}" is not an ISO 8601 duration such as P7D, PT30M or P1DT12H`);
  }
  let total = 0;
  let hasFraction = false;
  for (const [unit, unitMs] of Object.entries(MILLISECONDS)) {
    const digits = groups[unit];
    if (digits === undefined) continue;
    if (hasFraction) {
      throw new DomainError(`In "${text}" only the smallest component may have a fraction`);
    }
    hasFraction = /[.,]/.test(digits);
    total += Number(digits.replace(',', '.')) * unitMs;
  }
  if (total > DURATION_MS_MAX) throw new DomainError(`"${text}" is longer than 100,000 days`);
  return Math.round(total);
}
