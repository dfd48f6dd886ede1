import { chiSquareSurvival } from '../distributions/chi-square.ts';
import { fisherFSurvival } from '../distributions/fisher-f.ts';
import { type Estimable, notEstimable } from '../estimability.ts';
import { cholesky, logDeterminantFromCholesky } from '../numerics/cholesky.ts';
import type { Matrix } from '../numerics/matrix.ts';
import type { CorrectedTest, MauchlyTest, Sphericity } from './repeated-measures-types.ts';

/** The F test to be corrected, and the error matrix it rests on. */
export interface SphericityInput {
  /** d × d cross-products of the residual orthonormal contrast scores. */
  readonly errorCrossProducts: Matrix;
  /** Participants minus groups: the error degrees of freedom of one contrast. */
  readonly participantDegreesOfFreedom: number;
  readonly fStatistic: number;
  readonly degreesOfFreedom: number;
  readonly errorDegreesOfFreedom: number;
}

/** A denominator below this fraction of its terms is rounding. */
const DENOMINATOR_TOLERANCE = 1e-10;

/**
 * Mauchly's test, and the Greenhouse–Geisser and Huynh–Feldt corrections of one F test.
 *
 * With S the covariance of d orthonormal contrasts on ν = participants − groups degrees of freedom:
 * - Greenhouse & Geisser 1959 (Psychometrika 24:95): ε̂ = (tr S)² / (d·tr S²).
 * - Huynh & Feldt 1976 (J. Educ. Stat. 1:69), with the correction of Lecoutre 1991 (J. Educ. Stat.
 *   16:371) for more than one group: ε̃ = ((ν + 1)·d·ε̂ − 2) / (d·(ν − d·ε̂)). With one group the
 *   two agree. The raw value may exceed 1; the test uses at most 1.
 *
 * Both are kept away from the decision which test to report: that is the plan's.
 */
export function sphericityOf(input: SphericityInput): Sphericity {
  const { errorCrossProducts, participantDegreesOfFreedom } = input;
  const size = errorCrossProducts.rows;
  if (size < 2) return { applicable: false };
  let trace = 0;
  let squares = 0;
  for (let row = 0; row < size; row += 1) trace += errorCrossProducts.values[row * size + row]!;
  for (const value of errorCrossProducts.values) squares += (value / trace) ** 2;
  const epsilon = Math.min(1, 1 / (size * squares));
  return {
    applicable: true,
    mauchly: mauchlyTest(errorCrossProducts, trace, participantDegreesOfFreedom),
    greenhouseGeisser: correctedTest(input, epsilon),
    huynhFeldt: huynhFeldt(input, size, epsilon),
  };
}

function huynhFeldt(
  input: SphericityInput,
  size: number,
  epsilon: number,
): Estimable<CorrectedTest & { readonly rawEpsilon: number }> {
  const nu = input.participantDegreesOfFreedom;
  const denominator = size * (nu - size * epsilon);
  if (denominator <= DENOMINATOR_TOLERANCE * size * nu) {
    return notEstimable(
      'undefined-correction',
      'The Huynh–Feldt formula divides by zero: there are too few participants for this effect.',
    );
  }
  const rawEpsilon = ((nu + 1) * size * epsilon - 2) / denominator;
  return { estimable: true, rawEpsilon, ...correctedTest(input, Math.min(1, rawEpsilon)) };
}

function correctedTest(input: SphericityInput, epsilon: number): CorrectedTest {
  const degreesOfFreedom = input.degreesOfFreedom * epsilon;
  const errorDegreesOfFreedom = input.errorDegreesOfFreedom * epsilon;
  return {
    epsilon,
    degreesOfFreedom,
    errorDegreesOfFreedom,
    pValue: fisherFSurvival(input.fStatistic, degreesOfFreedom, errorDegreesOfFreedom),
  };
}

/**
 * Mauchly 1940 (Ann. Math. Stat. 11:204): W = |S| / (tr S / d)ᵈ. The p-value is the chi-square
 * approximation with its second-order term (Anderson, An Introduction to Multivariate Statistical
 * Analysis, 3rd ed., §10.7.4), limited to 1: with very few participants the term can overshoot.
 */
function mauchlyTest(crossProducts: Matrix, trace: number, nu: number): Estimable<MauchlyTest> {
  const d = crossProducts.rows;
  if (nu < d) {
    return notEstimable(
      'singular-covariance',
      `Mauchly's test needs at least ${d} degrees of freedom among participants; there are ${nu}.`,
    );
  }
  const factor = cholesky(crossProducts);
  if (factor === null) {
    return notEstimable('singular-covariance', 'The contrasts of this effect are collinear.');
  }
  const logW = Math.min(0, logDeterminantFromCholesky(factor) - d * Math.log(trace / d));
  const scale = nu - (2 * d * d + d + 2) / (6 * d);
  const chiSquare = -scale * logW;
  const degreesOfFreedom = (d * (d + 1)) / 2 - 1;
  const secondOrder =
    ((d + 2) * (d - 1) * (d - 2) * (2 * d ** 3 + 6 * d * d + 3 * d + 2)) / (288 * (d * scale) ** 2);
  const first = chiSquareSurvival(chiSquare, degreesOfFreedom);
  const second = chiSquareSurvival(chiSquare, degreesOfFreedom + 4);
  const pValue = Math.min(1, first + secondOrder * (second - first));
  return { estimable: true, w: Math.exp(logW), chiSquare, degreesOfFreedom, pValue };
}
