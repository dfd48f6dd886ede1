import { DomainError } from '../errors.ts';

/** ½·log(2π), to double precision. */
const HALF_LOG_TWO_PI = 0.9189385332046727;

/** B₂ₖ / (2k(2k − 1)), k = 1…8: coefficients of Stirling's series, DLMF 5.11.1. */
const STIRLING_SERIES = [
  1 / 12,
  -1 / 360,
  1 / 1260,
  -1 / 1680,
  1 / 1188,
  -691 / 360360,
  1 / 156,
  -3617 / 122400,
] as const;

/** From here on eight terms of the series leave less than 2⁻⁵³. */
const SERIES_FROM = 10;

/**
 * The remainder of Stirling's formula, δ(z) = log Γ(z + 1) − (z + ½)·log z + z − ½·log 2π.
 *
 * It is what is left of a gamma function after the large terms, which in densities cancel against
 * each other; working with δ keeps their digits (the idea of Loader 2000, "Fast and accurate
 * computation of binomial probabilities"). Below z = 10 the argument is raised by
 * δ(z) = δ(z + 1) + (z + ½)·log(1 + 1/z) − 1; above, DLMF 5.11.1.
 *
 * @param z z > 0
 * @returns δ(z) > 0, absolute error below 1e-15·(1 + |log z|)
 * @throws {DomainError} when z is NaN or ≤ 0
 */
export function stirlingRemainder(z: number): number {
  if (!(z > 0)) throw new DomainError(`Stirling's remainder needs z > 0, got ${z}.`);
  let raised = z;
  let correction = 0;
  while (raised < SERIES_FROM) {
    correction += (raised + 0.5) * Math.log1p(1 / raised) - 1;
    raised += 1;
  }
  const inverseSquare = 1 / (raised * raised);
  let series = 0;
  for (let term = STIRLING_SERIES.length - 1; term >= 0; term -= 1) {
    series = series * inverseSquare + STIRLING_SERIES[term]!;
  }
  return correction + series / raised;
}

/**
 * log Γ(z) for z > 0.
 *
 * Own code rather than jstat's `gammaln`, whose six-term Lanczos sum was measured at about 1e-10
 * relative, short of the 1e-12 asked of the distributions.
 * Source: DLMF 5.11.1 with the recurrence 5.5.1.
 *
 * @returns log Γ(z); absolute error below 1e-14 + 4e-16·|log Γ(z)|. Near its zeros at 1 and 2 the
 *   relative error is therefore larger.
 * @throws {DomainError} when z is NaN or ≤ 0
 */
export function logGamma(z: number): number {
  const remainder = stirlingRemainder(z);
  return (z - 0.5) * Math.log(z) - z + HALF_LOG_TWO_PI + remainder;
}

/**
 * log B(a, b) = log Γ(a) + log Γ(b) − log Γ(a + b), with the large terms cancelled beforehand.
 * Source: DLMF 5.12.1 with 5.11.1.
 *
 * @throws {DomainError} when a or b is NaN or ≤ 0
 */
export function logBeta(a: number, b: number): number {
  const smaller = Math.min(a, b);
  const larger = Math.max(a, b);
  const remainders =
    stirlingRemainder(smaller) + stirlingRemainder(larger) - stirlingRemainder(smaller + larger);
  // log Γ(z) = (z − ½)·log z − z + ½·log 2π + δ(z); the −z cancel, the logs join as ratios.
  return (
    HALF_LOG_TWO_PI +
    remainders -
    0.5 * Math.log(smaller) -
    smaller * Math.log1p(larger / smaller) -
    (larger - 0.5) * Math.log1p(smaller / larger)
  );
}

/** Below this |u| the power series of u − log(1 + u) is used: it cancels to u²/2 there. */
const DEVIANCE_SERIES_BELOW = 0.4;

/**
 * u − log(1 + u) for u > −1, without the cancellation near zero.
 *
 * With s = u/(2 + u), log(1 + u) = 2·artanh(s), so that u − log(1 + u) =
 * s·u − 2·(s³/3 + s⁵/5 + …), whose terms keep their size. Source: DLMF 4.6.4.
 */
export function logOnePlusDeviance(u: number): number {
  if (Math.abs(u) >= DEVIANCE_SERIES_BELOW) return u - Math.log1p(u);
  const ratio = u / (2 + u);
  const square = ratio * ratio;
  let power = ratio;
  let sum = 0;
  for (let odd = 3; odd < 60; odd += 2) {
    power *= square;
    const next = sum + power / odd;
    if (next === sum) break;
    sum = next;
  }
  return ratio * u - 2 * sum;
}
