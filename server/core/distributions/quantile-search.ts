import { assert, DomainError } from '../errors.ts';
import { monotoneRoot } from '../numerics/monotone-root.ts';

/** Both tails at a point x > 0 and d(lower)/d(log x), which all of them share. */
export interface TailsAt {
  readonly lower: number;
  readonly upper: number;
  readonly slope: number;
}

/** @throws {DomainError} when p is not a probability */
export function assertProbability(p: number): void {
  if (!(p >= 0 && p <= 1)) throw new DomainError(`A probability lies in [0, 1], got ${p}.`);
}

/** @throws {DomainError} when the degrees of freedom are NaN or not positive */
export function assertDegreesOfFreedom(degreesOfFreedom: number): void {
  if (!(degreesOfFreedom > 0)) {
    throw new DomainError(`Degrees of freedom are positive, got ${degreesOfFreedom}.`);
  }
}

/** log of the largest double, a little below: a root beyond it has no finite x. */
const LOG_LARGEST = 709.78271;

/**
 * The x > 0 at which the chosen tail equals p.
 *
 * Newton's method on log tail against log x, where both tails are smooth and nearly straight out
 * to 1e-300, safeguarded by a bracket; then one correction of x itself, since a logarithm near 700
 * holds three digits fewer than x.
 *
 * jstat's inverse distributions supply the start. They are good to a few digits in the body and
 * break down in the tails (they rest on lower tails of about 1e-8), which costs steps, not
 * accuracy: every result is the root of our own tails.
 *
 * @param tailsAt tails at x > 0
 * @param tail    which tail p is
 * @param p       0 < p < 1
 * @param start   a first guess of x; anything unusable is replaced by 1
 * @returns x; Infinity or 0 when it lies beyond the range of doubles
 */
export function positiveQuantile(
  tailsAt: (x: number) => TailsAt,
  tail: 'lower' | 'upper',
  p: number,
  start: number,
): number {
  const logP = Math.log(p);
  const evaluate = (x: number) => {
    const { lower, upper, slope } = tailsAt(x);
    return tail === 'lower'
      ? { value: Math.log(lower) - logP, slope: slope / lower }
      : { value: logP - Math.log(upper), slope: slope / upper };
  };
  const usable = start > 0 && Number.isFinite(start);
  const found = monotoneRoot((logX) => evaluate(Math.exp(logX)), usable ? Math.log(start) : 0);
  assert(found.stoppedBy !== 'limit', `the quantile search for ${tail} tail ${p} ends`);
  if (found.root > LOG_LARGEST) return Number.POSITIVE_INFINITY;
  const x = Math.exp(found.root);
  const { value, slope } = evaluate(x);
  const correction = value / slope;
  return Number.isFinite(correction) ? x - x * correction : x;
}
