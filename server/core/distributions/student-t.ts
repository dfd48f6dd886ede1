import jstat from 'jstat';
import { DomainError } from '../errors.ts';
import { type BetaTails, incompleteBeta } from '../numerics/incomplete-beta.ts';
import { logBeta } from '../numerics/stirling.ts';
import { normalSurvival, normalSurvivalQuantile } from './normal.ts';
import { assertDegreesOfFreedom, assertProbability, positiveQuantile } from './quantile-search.ts';

/** Beyond this t/√ν the tail is its leading power to double precision, and t² may overflow. */
const POWER_TAIL_FROM = 1e9;

/** Tails of |T| at t ≥ 0: lower P(|T| ≤ t), upper P(|T| > t). ν is finite. */
function absoluteTails(t: number, degreesOfFreedom: number): BetaTails {
  const scaled = t / Math.sqrt(degreesOfFreedom);
  if (scaled > POWER_TAIL_FROM) {
    // I_x(ν/2, ½) for x = ν/t² → 0 is xᵃ/(a·B(a, ½)) with a = ν/2; the next term is x times that.
    const half = degreesOfFreedom / 2;
    const powerTerm = scaled ** -degreesOfFreedom / Math.exp(logBeta(half, 0.5));
    return { lower: 1 - powerTerm / half, upper: powerTerm / half, powerTerm };
  }
  const ratio = scaled * scaled;
  return incompleteBeta({
    a: 0.5,
    b: degreesOfFreedom / 2,
    x: ratio / (1 + ratio),
    y: 1 / (1 + ratio),
    belowMean: (0.5 * ((1 - t) * (1 + t))) / (1 + ratio),
  });
}

/**
 * Upper tail P(T > t) of Student's t, computed directly, never as 1 − cdf.
 *
 * ½·I_y(ν/2, ½) with y = ν/(ν + t²) for t ≥ 0; near t = 0, where that tail is close to ½, it is
 * ½ − ½·I_x(½, ν/2) with x = t²/(ν + t²), so that t is not rounded away.
 * Source: DLMF §8.17. jstat's cdf is not used: its upper tail is 1 − cdf.
 *
 * @param t                any real number or ±Infinity
 * @param degreesOfFreedom ν > 0, not necessarily whole; Infinity is the normal limit
 * @returns probability in [0, 1]
 * @throws {DomainError} when t is NaN, or degreesOfFreedom NaN or ≤ 0
 */
export function studentTSurvival(t: number, degreesOfFreedom: number): number {
  assertDegreesOfFreedom(degreesOfFreedom);
  if (Number.isNaN(t)) throw new DomainError('A t statistic is a number, got NaN.');
  if (degreesOfFreedom === Number.POSITIVE_INFINITY) return normalSurvival(t);
  const { lower, upper } = absoluteTails(Math.abs(t), degreesOfFreedom);
  return t >= 0 ? upper / 2 : 0.5 + lower / 2;
}

/** Lower tail P(T ≤ t), computed directly; see {@link studentTSurvival}. */
export function studentTCdf(t: number, degreesOfFreedom: number): number {
  return studentTSurvival(-t, degreesOfFreedom);
}

/** P(|T| > |t|), the two-sided p-value of a t statistic; see {@link studentTSurvival}. */
export function studentTTwoSided(t: number, degreesOfFreedom: number): number {
  return Math.min(1, 2 * studentTSurvival(Math.abs(t), degreesOfFreedom));
}

/**
 * The t with P(T > t) = p, for p however small. jstat's `studentt.inv` gives the start, our own
 * tails the answer.
 *
 * @param p                in [0, 1]; 0 gives Infinity, 1 gives −Infinity
 * @param degreesOfFreedom ν > 0; Infinity is the normal limit
 * @throws {DomainError} when p is not a probability, or degreesOfFreedom NaN or ≤ 0
 */
export function studentTSurvivalQuantile(p: number, degreesOfFreedom: number): number {
  assertProbability(p);
  assertDegreesOfFreedom(degreesOfFreedom);
  if (degreesOfFreedom === Number.POSITIVE_INFINITY) return normalSurvivalQuantile(p);
  if (p === 0) return Number.POSITIVE_INFINITY;
  if (p === 0.5) return 0;
  if (p > 0.5) return -studentTSurvivalQuantile(1 - p, degreesOfFreedom);
  const start = -jstat.studentt.inv(p, degreesOfFreedom);
  const tailsAt = (t: number) => {
    const { lower, upper, powerTerm } = absoluteTails(t, degreesOfFreedom);
    return { lower, upper, slope: 2 * powerTerm };
  };
  // P(|T| > t) = 2p; near the middle the central probability 1 − 2p is the exact one.
  return p < 0.25
    ? positiveQuantile(tailsAt, 'upper', 2 * p, start)
    : positiveQuantile(tailsAt, 'lower', 1 - 2 * p, start);
}

/** The t with P(T ≤ t) = p; see {@link studentTSurvivalQuantile}. */
export function studentTQuantile(p: number, degreesOfFreedom: number): number {
  return -studentTSurvivalQuantile(p, degreesOfFreedom);
}
