import { DomainError } from '../errors.ts';
import {
  type ConfidenceInterval,
  type Estimable,
  type NotEstimable,
  notEstimable,
} from '../estimability.ts';
import type { RatioEstimate } from './inference-types.ts';

/** exp overflows beyond this; a difference of mean logarithms never comes near. */
const LOG_MAX = 700;

/**
 * Natural logarithms of positive values, NaN (missing) kept.
 *
 * @returns the logarithms, or `non-positive-value`: no value is ever shifted or dropped to make a
 *   logarithm possible
 */
export function logValues(values: ArrayLike<number>): Estimable<{ readonly values: Float64Array }> {
  const logarithms = new Float64Array(values.length);
  let nonPositive = 0;
  for (let index = 0; index < values.length; index += 1) {
    const value = values[index]!;
    if (value <= 0) nonPositive += 1;
    logarithms[index] = Math.log(value);
  }
  if (nonPositive > 0) return nonPositiveValues(nonPositive, values.length);
  return { estimable: true, values: logarithms };
}

function nonPositiveValues(count: number, total: number): NotEstimable {
  return notEstimable(
    'non-positive-value',
    `${count} of ${total} values are zero or below and have no logarithm.`,
  );
}

/**
 * The geometric mean, exp of the mean logarithm.
 *
 * @returns the mean, or `non-positive-value`, or `too-few-observations` when there are no values
 * @throws {DomainError} when a value is not finite
 */
export function geometricMean(values: ArrayLike<number>): Estimable<{ readonly mean: number }> {
  if (values.length === 0) return notEstimable('too-few-observations', 'There are no values.');
  const logarithms = logValues(values);
  if (!logarithms.estimable) return logarithms;
  const sum = logarithms.values.reduce((total, value) => total + value, 0);
  if (!Number.isFinite(sum)) throw new DomainError('A geometric mean needs finite values.');
  return { estimable: true, mean: Math.exp(sum / values.length) };
}

/**
 * A difference of mean logarithms and its interval as a ratio of geometric means.
 *
 * exp is monotone, so the interval keeps its level; the ratio is not one of arithmetic means.
 * Source: Jones & Kenward, Design and Analysis of Cross-Over Trials, 3rd ed., ch. 7.
 *
 * @throws {DomainError} when an end is not finite or beyond ±700
 */
export function ratioFromLogDifference(
  difference: number,
  interval: ConfidenceInterval,
): RatioEstimate {
  for (const value of [difference, interval.lower, interval.upper]) {
    if (!(Math.abs(value) <= LOG_MAX)) {
      throw new DomainError(`A difference of logarithms lies within ±700, got ${value}.`);
    }
  }
  return {
    ratio: Math.exp(difference),
    interval: {
      level: interval.level,
      lower: Math.exp(interval.lower),
      upper: Math.exp(interval.upper),
    },
  };
}
