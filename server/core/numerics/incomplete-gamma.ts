import { assert, DomainError } from '../errors.ts';
import { logOnePlusDeviance, stirlingRemainder } from './stirling.ts';

/** Both tails of the regularised incomplete gamma, and the power term they share. */
export interface GammaTails {
  /** P(a, x) */
  readonly lower: number;
  /** Q(a, x) = 1 − P(a, x) */
  readonly upper: number;
  /** xᵃ·e⁻ˣ / Γ(a): the derivative of `lower` with respect to log x. */
  readonly powerTerm: number;
}

/** A term or convergent moves by less than this, relatively, when the sum has converged. */
const CONVERGED = 2 ** -53;

/** Series and fraction need a few times √a steps near x = a: ample up to a of 1e9. */
const STEPS_MAX = 500_000;

/**
 * Both tails of the regularised incomplete gamma function at x.
 *
 * Power term by deviance, as in `incompleteBeta`. Below the mean the lower tail is the series DLMF
 * 8.7.1; above, the upper tail is the continued fraction DLMF 8.9.2 (even part, modified Lentz).
 * The other tail, never small, is its complement.
 *
 * @param a shape, finite and > 0
 * @param x x ≥ 0, Infinity allowed
 * @throws {DomainError} when a is not positive and finite, or x is NaN or negative
 */
export function incompleteGamma(a: number, x: number): GammaTails {
  if (!(a > 0 && Number.isFinite(a))) {
    throw new DomainError(`The incomplete gamma needs finite a > 0, got ${a}.`);
  }
  if (!(x >= 0)) throw new DomainError(`The incomplete gamma needs x ≥ 0, got ${x}.`);
  if (x === 0) return { lower: 0, upper: 1, powerTerm: 0 };
  if (x === Number.POSITIVE_INFINITY) return { lower: 1, upper: 0, powerTerm: 0 };
  const powerTerm = gammaPowerTerm(a, x);
  // With a < 1 the upper tail falls below one half only from about x = a + ½ on.
  if (x < a + 0.5) {
    const lower = Math.min(1, powerTerm * lowerSeries(a, x));
    return { lower, upper: 1 - lower, powerTerm };
  }
  const upper = Math.min(1, powerTerm * upperFraction(a, x));
  return { lower: 1 - upper, upper, powerTerm };
}

function gammaPowerTerm(a: number, x: number): number {
  const u = (x - a) / a;
  const deviance = u < -0.5 ? u - Math.log(x / a) : logOnePlusDeviance(u);
  return Math.sqrt(a / (2 * Math.PI)) * Math.exp(-a * deviance - stirlingRemainder(a));
}

/** Σ xⁿ / (a·(a + 1)…(a + n)) */
function lowerSeries(a: number, x: number): number {
  let term = 1 / a;
  let sum = term;
  for (let n = 1; n <= STEPS_MAX; n += 1) {
    term *= x / (a + n);
    sum += term;
    if (term <= CONVERGED * sum) return sum;
  }
  assert(false, `the incomplete gamma series converges within ${STEPS_MAX} steps (a = ${a})`);
}

/** 1/(x + 1 − a − 1·(1 − a)/(x + 3 − a − 2·(2 − a)/(x + 5 − a − …))) */
function upperFraction(a: number, x: number): number {
  let offset = x - a + 1;
  let c = Number.POSITIVE_INFINITY;
  let d = 1 / offset;
  let value = d;
  for (let n = 1; n <= STEPS_MAX; n += 1) {
    const alpha = -n * (n - a);
    offset += 2;
    d = 1 / (alpha * d + offset);
    c = offset + alpha / c;
    const step = c * d;
    value *= step;
    if (Math.abs(step - 1) <= 2 * CONVERGED) return value;
  }
  assert(false, `the incomplete gamma fraction converges within ${STEPS_MAX} steps (a = ${a})`);
}
