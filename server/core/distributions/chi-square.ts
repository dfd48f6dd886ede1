import jstat from 'jstat';
import { DomainError } from '../errors.ts';
import { incompleteGamma } from '../numerics/incomplete-gamma.ts';
import { assertDegreesOfFreedom, assertProbability, positiveQuantile } from './quantile-search.ts';

function tails(chiSquare: number, degreesOfFreedom: number) {
  assertDegreesOfFreedom(degreesOfFreedom);
  if (Number.isNaN(chiSquare)) throw new DomainError('A chi-square is a number, got NaN.');
  return incompleteGamma(degreesOfFreedom / 2, Math.max(0, chiSquare) / 2);
}

/**
 * Upper tail P(X > x) of the chi-square distribution, Q(ν/2, x/2), computed directly.
 * Source: DLMF §8.2. jstat's cdf is not used: its upper tail is 1 − cdf.
 *
 * @param chiSquare        x, any real number or Infinity; below 0 the tail is 1
 * @param degreesOfFreedom ν > 0 and finite, not necessarily whole
 * @throws {DomainError} outside that domain
 */
export function chiSquareSurvival(chiSquare: number, degreesOfFreedom: number): number {
  return tails(chiSquare, degreesOfFreedom).upper;
}

/** Lower tail P(X ≤ x), computed directly; see {@link chiSquareSurvival}. */
export function chiSquareCdf(chiSquare: number, degreesOfFreedom: number): number {
  return tails(chiSquare, degreesOfFreedom).lower;
}

/**
 * The x with P(X ≤ x) = p. jstat's `chisquare.inv` gives the start, our own tails the answer.
 *
 * @param p in [0, 1]; 0 gives 0, 1 gives Infinity
 * @throws {DomainError} when p is not a probability, or ν not positive and finite
 */
export function chiSquareQuantile(p: number, degreesOfFreedom: number): number {
  return quantile('lower', p, degreesOfFreedom);
}

/** The x with P(X > x) = p, for p however small; see {@link chiSquareQuantile}. */
export function chiSquareSurvivalQuantile(p: number, degreesOfFreedom: number): number {
  return quantile('upper', p, degreesOfFreedom);
}

function quantile(tail: 'lower' | 'upper', p: number, degreesOfFreedom: number): number {
  assertProbability(p);
  assertDegreesOfFreedom(degreesOfFreedom);
  if (p === 0) return tail === 'lower' ? 0 : Number.POSITIVE_INFINITY;
  if (p === 1) return tail === 'lower' ? Number.POSITIVE_INFINITY : 0;
  const start = jstat.chisquare.inv(tail === 'lower' ? p : 1 - p, degreesOfFreedom);
  return positiveQuantile(
    (x) => {
      const { lower, upper, powerTerm } = tails(x, degreesOfFreedom);
      return { lower, upper, slope: powerTerm };
    },
    tail,
    p,
    start,
  );
}
