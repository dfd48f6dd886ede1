import jstat from 'jstat';
import { DomainError } from '../errors.ts';
import { type BetaTails, incompleteBeta } from '../numerics/incomplete-beta.ts';
import { incompleteGamma } from '../numerics/incomplete-gamma.ts';
import { assertDegreesOfFreedom, assertProbability, positiveQuantile } from './quantile-search.ts';

/** From here on 1 + ratio is ratio, in double precision. */
const RATIO_ALONE_FROM = 2 ** 60;

/** Both tails of F with (ν₁, ν₂) degrees of freedom, ν₂ possibly infinite. */
function tails(f: number, numerator: number, denominator: number): BetaTails {
  assertDegreesOfFreedom(numerator);
  assertDegreesOfFreedom(denominator);
  if (Number.isNaN(f)) throw new DomainError('An F statistic is a number, got NaN.');
  if (f <= 0) return { lower: 0, upper: 1, powerTerm: 0 };
  if (f === Number.POSITIVE_INFINITY) return { lower: 1, upper: 0, powerTerm: 0 };
  if (denominator === Number.POSITIVE_INFINITY) {
    return incompleteGamma(numerator / 2, (numerator * f) / 2);
  }
  const ratio = (numerator / denominator) * f;
  const large = ratio > RATIO_ALONE_FROM;
  return incompleteBeta({
    a: numerator / 2,
    b: denominator / 2,
    x: large ? 1 : ratio / (1 + ratio),
    y: large ? denominator / numerator / f : 1 / (1 + ratio),
    belowMean: large ? -denominator / 2 : ((numerator / 2) * (1 - f)) / (1 + ratio),
  });
}

/**
 * Upper tail P(X > f) of Fisher's F, computed directly: I_y(ν₂/2, ν₁/2) with
 * y = ν₂/(ν₂ + ν₁·f). How far f is from 1 enters separately, since y, once rounded, has lost it
 * when both ν are large. Source: DLMF §8.17. jstat's cdf is not used: its upper tail is 1 − cdf.
 *
 * @param f           any real number or Infinity; at or below 0 the tail is 1
 * @param numerator   ν₁ > 0 and finite, not necessarily whole
 * @param denominator ν₂ > 0; Infinity is the limit chi-square/ν₁
 * @throws {DomainError} outside that domain
 */
export function fisherFSurvival(f: number, numerator: number, denominator: number): number {
  return tails(f, numerator, denominator).upper;
}

/** Lower tail P(X ≤ f), computed directly; see {@link fisherFSurvival}. */
export function fisherFCdf(f: number, numerator: number, denominator: number): number {
  return tails(f, numerator, denominator).lower;
}

/**
 * The f with P(X ≤ f) = p. jstat's `centralF.inv` gives the start, our own tails the answer.
 *
 * @param p in [0, 1]; 0 gives 0, 1 gives Infinity
 * @throws {DomainError} when p is not a probability or the degrees of freedom are out of domain
 */
export function fisherFQuantile(p: number, numerator: number, denominator: number): number {
  return quantile('lower', p, numerator, denominator);
}

/** The f with P(X > f) = p, for p however small; see {@link fisherFQuantile}. */
export function fisherFSurvivalQuantile(p: number, numerator: number, denominator: number): number {
  return quantile('upper', p, numerator, denominator);
}

function quantile(
  tail: 'lower' | 'upper',
  p: number,
  numerator: number,
  denominator: number,
): number {
  assertProbability(p);
  assertDegreesOfFreedom(numerator);
  assertDegreesOfFreedom(denominator);
  if (p === 0) return tail === 'lower' ? 0 : Number.POSITIVE_INFINITY;
  if (p === 1) return tail === 'lower' ? Number.POSITIVE_INFINITY : 0;
  const start = jstat.centralF.inv(tail === 'lower' ? p : 1 - p, numerator, denominator);
  return positiveQuantile(
    (f) => {
      const { lower, upper, powerTerm } = tails(f, numerator, denominator);
      return { lower, upper, slope: powerTerm };
    },
    tail,
    p,
    start,
  );
}
