import jstat from 'jstat';
import { DomainError } from '../errors.ts';
import type { RandomStream } from '../numerics/generator.ts';
import { incompleteGamma } from '../numerics/incomplete-gamma.ts';
import { assertProbability, positiveQuantile } from './quantile-search.ts';

/**
 * Upper tail P(Z > z) of the standard normal distribution, computed directly: ½·Q(½, z²/2) for
 * z ≥ 0. Source: DLMF 7.11.2 and 8.4.6. jstat's cdf is not used: its upper tail is 1 − cdf.
 *
 * @param z any real number or ±Infinity
 * @returns probability in [0, 1]
 * @throws {DomainError} when z is NaN
 */
export function normalSurvival(z: number): number {
  if (Number.isNaN(z)) throw new DomainError('The normal distribution needs a number, got NaN.');
  const { lower, upper } = incompleteGamma(0.5, (z * z) / 2);
  return z >= 0 ? upper / 2 : 0.5 + lower / 2;
}

/** Lower tail P(Z ≤ z); see {@link normalSurvival}. */
export function normalCdf(z: number): number {
  return normalSurvival(-z);
}

/**
 * The z with P(Z > z) = p. jstat's `normal.inv` gives the start, our own tails the answer.
 *
 * @param p in [0, 1]; 0 gives Infinity, 1 gives −Infinity
 * @throws {DomainError} when p is not a probability
 */
export function normalSurvivalQuantile(p: number): number {
  assertProbability(p);
  if (p === 0) return Number.POSITIVE_INFINITY;
  if (p === 0.5) return 0;
  if (p > 0.5) return -normalSurvivalQuantile(1 - p);
  const start = -jstat.normal.inv(p, 0, 1);
  const tailsAt = (z: number) => {
    const { lower, upper, powerTerm } = incompleteGamma(0.5, (z * z) / 2);
    return { lower, upper, slope: 2 * powerTerm };
  };
  // P(|Z| > z) = 2p; near the middle the central probability 1 − 2p is the exact one.
  return p < 0.25
    ? positiveQuantile(tailsAt, 'upper', 2 * p, start)
    : positiveQuantile(tailsAt, 'lower', 1 - 2 * p, start);
}

/** The z with P(Z ≤ z) = p; see {@link normalSurvivalQuantile}. */
export function normalQuantile(p: number): number {
  return -normalSurvivalQuantile(p);
}

/**
 * A standard normal draw by inversion of one uniform: the bits are whole-number arithmetic, the
 * last step is floating point and may differ in its last digits between engines.
 */
export function normalDraw(stream: RandomStream): number {
  return normalQuantile(stream.nextUniform());
}
