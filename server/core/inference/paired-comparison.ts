import { normalSurvivalQuantile } from '../distributions/normal.ts';
import { studentTSurvivalQuantile, studentTTwoSided } from '../distributions/student-t.ts';
import { DomainError } from '../errors.ts';
import { type ConfidenceInterval, type Estimable, notEstimable } from '../estimability.ts';
import { assertConfidenceLevel } from '../numerics/confidence-level.ts';
import { isRoundingOnly, largestMagnitude } from '../numerics/magnitude.ts';
import { logGamma } from '../numerics/stirling.ts';
import type { PairedComparison, StandardisedDifference } from './inference-types.ts';

/**
 * Two conditions compared on the same participants: paired t test, interval, and two standardised
 * differences, both times Hedges' correction.
 *
 * - d_z, over the standard deviation of the differences; large-sample variance 1/n + d²/(2n),
 *   Gibbons, Hedeker & Davis 1993 (J. Educ. Stat. 18:271).
 * - d_av, over the root mean of the two conditions' variances, comparable with studies between
 *   participants; Cumming, Understanding the New Statistics, 2012, ch. 11, with the variance of
 *   Bonett 2008 (Psychol. Methods 13:99).
 *
 * Their intervals are normal approximations, about the uncorrected estimates.
 *
 * @param first  by participant
 * @param second by participant, the same order; every difference is first − second
 * @throws {DomainError} when lengths differ, a value is not finite or beyond 1e100, or the level is
 *   not in (0, 1)
 */
export function pairedComparison(
  first: ArrayLike<number>,
  second: ArrayLike<number>,
  { confidenceLevel = 0.95 }: { readonly confidenceLevel?: number } = {},
): PairedComparison {
  assertConfidenceLevel(confidenceLevel);
  const pairs = first.length;
  if (second.length !== pairs) {
    throw new DomainError(`Pairs need equal lengths, got ${pairs} and ${second.length}.`);
  }
  const magnitude = Math.max(largestMagnitude(first), largestMagnitude(second));
  if (pairs < 2) {
    return notEstimable('too-few-participants', `Two pairs are needed; there are ${pairs}.`);
  }
  const differences = Float64Array.from({ length: pairs }, (_, i) => first[i]! - second[i]!);
  const { mean: meanDifference, sumOfSquares } = momentsOf(differences);
  if (isRoundingOnly(sumOfSquares, pairs, magnitude)) {
    return notEstimable('zero-error-variance', 'All differences are the same within rounding.');
  }
  const degreesOfFreedom = pairs - 1;
  const standardDeviation = Math.sqrt(sumOfSquares / degreesOfFreedom);
  const standardError = standardDeviation / Math.sqrt(pairs);
  const half =
    standardError * studentTSurvivalQuantile((1 - confidenceLevel) / 2, degreesOfFreedom);
  const tStatistic = meanDifference / standardError;
  const dz = meanDifference / standardDeviation;
  return {
    estimable: true,
    pairs,
    meanDifference,
    standardDeviation,
    standardError,
    interval: around(meanDifference, half, confidenceLevel),
    tStatistic,
    degreesOfFreedom,
    pValue: studentTTwoSided(tStatistic, degreesOfFreedom),
    dz: standardised(dz, 1 / pairs + dz ** 2 / (2 * pairs), degreesOfFreedom, confidenceLevel),
    dav: averageStandardised(first, second, { meanDifference, magnitude, confidenceLevel }),
  };
}

/**
 * Hedges' correction J(m) = Γ(m/2) / (√(m/2)·Γ((m − 1)/2)) for a standardised difference on m
 * degrees of freedom. Source: Hedges 1981 (J. Educ. Stat. 6:107), the exact form.
 *
 * @returns in (0, 1); 0 for m = 1, where the standardised difference has no expectation
 */
export function hedgesCorrection(degreesOfFreedom: number): number {
  if (degreesOfFreedom <= 1) return 0;
  const half = degreesOfFreedom / 2;
  return Math.exp(logGamma(half) - logGamma(half - 0.5) - 0.5 * Math.log(half));
}

function momentsOf(values: Float64Array): { mean: number; sumOfSquares: number } {
  const mean = values.reduce((sum, value) => sum + value, 0) / values.length;
  const sumOfSquares = values.reduce((sum, value) => sum + (value - mean) ** 2, 0);
  return { mean, sumOfSquares };
}

function around(centre: number, half: number, level: number): ConfidenceInterval {
  return { level, lower: centre - half, upper: centre + half };
}

function standardised(
  estimate: number,
  variance: number,
  degreesOfFreedom: number,
  confidenceLevel: number,
): StandardisedDifference {
  const half = Math.sqrt(variance) * normalSurvivalQuantile((1 - confidenceLevel) / 2);
  return {
    estimate,
    corrected: estimate * hedgesCorrection(degreesOfFreedom),
    interval: around(estimate, half, confidenceLevel),
  };
}

function averageStandardised(
  first: ArrayLike<number>,
  second: ArrayLike<number>,
  shared: { meanDifference: number; magnitude: number; confidenceLevel: number },
): Estimable<StandardisedDifference> {
  const { meanDifference, magnitude, confidenceLevel } = shared;
  const one = Float64Array.from(first);
  const two = Float64Array.from(second);
  const ofOne = momentsOf(one);
  const ofTwo = momentsOf(two);
  const pairs = one.length;
  if (isRoundingOnly(ofOne.sumOfSquares + ofTwo.sumOfSquares, 2 * pairs, magnitude)) {
    return notEstimable('zero-error-variance', 'Neither condition varies among participants.');
  }
  const degreesOfFreedom = pairs - 1;
  const varianceOne = ofOne.sumOfSquares / degreesOfFreedom;
  const varianceTwo = ofTwo.sumOfSquares / degreesOfFreedom;
  const covariance =
    one.reduce((sum, value, i) => sum + (value - ofOne.mean) * (two[i]! - ofTwo.mean), 0) /
    degreesOfFreedom;
  const average = (varianceOne + varianceTwo) / 2;
  const estimate = meanDifference / Math.sqrt(average);
  const ratio = (varianceOne / average) ** 2 + (varianceTwo / average) ** 2;
  const variance =
    (estimate ** 2 * (ratio + 2 * (covariance / average) ** 2)) / (8 * degreesOfFreedom) +
    (varianceOne + varianceTwo - 2 * covariance) / average / degreesOfFreedom;
  return {
    estimable: true,
    ...standardised(estimate, variance, degreesOfFreedom, confidenceLevel),
  };
}
