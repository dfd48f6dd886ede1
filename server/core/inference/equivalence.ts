import { studentTSurvival, studentTSurvivalQuantile } from '../distributions/student-t.ts';
import { DomainError } from '../errors.ts';
import type { EquivalenceInput, EquivalenceTest } from './inference-types.ts';

/**
 * Two one-sided tests that a difference lies inside its margins.
 *
 * Each margin is tested at alpha, and equivalence is shown when both are passed, which is when the
 * 1 − 2·alpha interval lies within them.
 * Source: Schuirmann 1987 (J. Pharmacokinet. Biopharm. 15:657).
 *
 * @param input margins in the unit of the estimate, lower < upper; alpha in (0, ½)
 * @throws {DomainError} outside that domain, or when the standard error is not positive
 */
export function twoOneSidedTests(input: EquivalenceInput): EquivalenceTest {
  const { estimate, standardError, degreesOfFreedom, lowerMargin, upperMargin, alpha } = input;
  if (!(standardError > 0 && Number.isFinite(standardError) && Number.isFinite(estimate))) {
    throw new DomainError(`An estimate and its positive error are needed, got ${standardError}.`);
  }
  if (!(lowerMargin < upperMargin && Number.isFinite(upperMargin - lowerMargin))) {
    throw new DomainError(`Margins need lower < upper, got ${lowerMargin} and ${upperMargin}.`);
  }
  if (!(alpha > 0 && alpha < 0.5)) throw new DomainError(`Alpha lies in (0, ½), got ${alpha}.`);
  const aboveLower = (estimate - lowerMargin) / standardError;
  const belowUpper = (estimate - upperMargin) / standardError;
  const lowerP = studentTSurvival(aboveLower, degreesOfFreedom);
  const upperP = studentTSurvival(-belowUpper, degreesOfFreedom);
  const pValue = Math.max(lowerP, upperP);
  const half = standardError * studentTSurvivalQuantile(alpha, degreesOfFreedom);
  return {
    lowerMargin,
    upperMargin,
    lowerTest: { tStatistic: aboveLower, pValue: lowerP },
    upperTest: { tStatistic: belowUpper, pValue: upperP },
    pValue,
    interval: { level: 1 - 2 * alpha, lower: estimate - half, upper: estimate + half },
    equivalent: pValue <= alpha,
  };
}

/**
 * Two one-sided tests that a ratio of geometric means lies inside its margins, from the difference
 * of mean logarithms; margins and interval are ratios. See {@link twoOneSidedTests}.
 *
 * @throws {DomainError} when the margins are not 0 < lower < 1 < upper, and as that function does
 */
export function twoOneSidedRatioTests(input: EquivalenceInput): EquivalenceTest {
  const { lowerMargin, upperMargin } = input;
  if (!(lowerMargin > 0 && lowerMargin < 1 && upperMargin > 1)) {
    throw new DomainError(
      `Margins of a ratio need 0 < lower < 1 < upper, got ${lowerMargin} and ${upperMargin}.`,
    );
  }
  const onLogScale = twoOneSidedTests({
    ...input,
    lowerMargin: Math.log(lowerMargin),
    upperMargin: Math.log(upperMargin),
  });
  const { level, lower, upper } = onLogScale.interval;
  return {
    ...onLogScale,
    lowerMargin,
    upperMargin,
    interval: { level, lower: Math.exp(lower), upper: Math.exp(upper) },
  };
}
