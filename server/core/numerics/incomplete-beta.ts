import { assert, DomainError } from '../errors.ts';
import { logOnePlusDeviance, stirlingRemainder } from './stirling.ts';

/** Where the beta integral is cut, said without rounding. See {@link incompleteBeta}. */
export interface BetaPoint {
  /** First shape parameter, > 0. */
  readonly a: number;
  /** Second shape parameter, > 0. */
  readonly b: number;
  /** The point, in [0, 1]. */
  readonly x: number;
  /** 1 − x, computed directly and not by subtraction. */
  readonly y: number;
  /** a·y − b·x, the distance below the mean times a + b, likewise computed directly. */
  readonly belowMean: number;
}

/** Both tails of the regularised incomplete beta, and the power term they share. */
export interface BetaTails {
  /** I_x(a, b) */
  readonly lower: number;
  /** 1 − I_x(a, b) = I_y(b, a) */
  readonly upper: number;
  /** xᵃ·yᵇ / B(a, b): the derivative of `lower` with respect to log(x/y). */
  readonly powerTerm: number;
}

/** A convergent moves by less than this, relatively, when the fraction has converged. */
const CONVERGED = 2 ** -53;

/** The fraction needs a few times √max(a, b) steps at worst: ample up to a, b of 1e9. */
const STEPS_MAX = 200_000;

/**
 * Both tails of the regularised incomplete beta function I_x(a, b).
 *
 * The power term is written with deviances, xᵃyᵇ/B(a,b) = √(ab/2π(a+b))·exp(δ(a+b) − δ(a) − δ(b)
 * − a·g(−d/a) − b·g(d/b)), where d = `belowMean`, g(u) = u − log(1 + u) and δ is Stirling's
 * remainder: every term is as large as the result needs and nothing cancels, which x alone, once
 * rounded, would not allow for large a and b. The tail on the far side of the mean comes from
 * the continued fraction of DiDonato & Morris 1992 (ACM TOMS 18:360, their eq. 9; the even part of
 * DLMF 8.17.22), the other, which is not small, by subtraction from 1.
 *
 * @returns probabilities in [0, 1]
 * @throws {DomainError} when a or b is not positive and finite, or x, y lie outside [0, 1]
 */
export function incompleteBeta(point: BetaPoint): BetaTails {
  const { a, b, x, y, belowMean } = point;
  if (!(a > 0 && b > 0 && Number.isFinite(a) && Number.isFinite(b))) {
    throw new DomainError(`The incomplete beta needs finite a, b > 0, got ${a} and ${b}.`);
  }
  if (!(x >= 0 && x <= 1 && y >= 0 && y <= 1)) {
    throw new DomainError(`The incomplete beta needs x and y in [0, 1], got ${x} and ${y}.`);
  }
  const powerTerm = betaPowerTerm(point);
  if (belowMean >= 0) {
    const lower = x === 0 ? 0 : Math.min(1, powerTerm * tailFraction(a, b, x, y, belowMean));
    return { lower, upper: 1 - lower, powerTerm };
  }
  const upper = y === 0 ? 0 : Math.min(1, powerTerm * tailFraction(b, a, y, x, -belowMean));
  return { lower: 1 - upper, upper, powerTerm };
}

/** xᵃ·yᵇ / B(a, b); see {@link incompleteBeta}. */
function betaPowerTerm({ a, b, x, y, belowMean }: BetaPoint): number {
  if (x === 0 || y === 0) return 0;
  const sum = a + b;
  const deviance =
    a * deviation(-belowMean / a, (sum / a) * x) + b * deviation(belowMean / b, (sum / b) * y);
  const remainders = stirlingRemainder(sum) - stirlingRemainder(a) - stirlingRemainder(b);
  return Math.sqrt(((a / sum) * b) / (2 * Math.PI)) * Math.exp(remainders - deviance);
}

/**
 * g(u) = u − log(1 + u), taking 1 + u from its own accurate value where u has lost it.
 */
function deviation(u: number, onePlusU: number): number {
  return u < -0.5 ? u - Math.log(onePlusU) : logOnePlusDeviance(u);
}

/** I_x(a, b) over its power term, for x at or below the mean. */
function tailFraction(a: number, b: number, x: number, y: number, belowMean: number): number {
  const c = 1 + belowMean;
  const c0 = b / a;
  const c1 = 1 + 1 / a;
  let p = 1;
  let s = a + 1;
  let numerator = 0;
  let numeratorNext = 1;
  let denominator = 1;
  let denominatorNext = c / c1;
  let value = c1 / c;
  for (let n = 1; n <= STEPS_MAX; n += 1) {
    const t = n / a;
    const w = n * (b - n) * x;
    const e = a / s;
    const alpha = p * (p + c0) * e * e * (w * x);
    const beta = n + w / s + ((1 + t) / (c1 + t + t)) * (c + n * (1 + y));
    p = 1 + t;
    s += 2;
    const numeratorAfter = alpha * numerator + beta * numeratorNext;
    const denominatorAfter = alpha * denominator + beta * denominatorNext;
    const before = value;
    value = numeratorAfter / denominatorAfter;
    if (Math.abs(value - before) <= CONVERGED * value) return value;
    // Scaled so that the newest denominator is one: the recurrences would overflow otherwise.
    numerator = numeratorNext / denominatorAfter;
    denominator = denominatorNext / denominatorAfter;
    numeratorNext = value;
    denominatorNext = 1;
  }
  assert(false, `the incomplete beta fraction converges within ${STEPS_MAX} steps (${a}, ${b})`);
}
