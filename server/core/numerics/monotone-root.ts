/** How a root search ended: `step` and `bracket` are success, `limit` is not. */
export interface RootResult {
  readonly root: number;
  readonly stoppedBy: 'step' | 'bracket' | 'limit';
  readonly iterations: number;
}

/** A function value and its derivative at one point. */
export interface ValueAndSlope {
  readonly value: number;
  readonly slope: number;
}

/** Below this step relative to 1 + |x| a further Newton step changes only rounding. */
const STEP_TOLERANCE = 2 ** -51;

/** Doubling a bracket of one reaches any double in far fewer; bisection of doubles in 1100. */
const ITERATIONS_MAX = 2_000;

/**
 * The root of an increasing function: Newton's steps, kept inside a bracket that is an invariant
 * and halved whenever a step leaves it or the value is not finite.
 *
 * @param evaluate increasing in x; may give −Infinity or Infinity, but not NaN
 * @param start    where to begin: any number, the closer the faster
 * Source: safeguarded Newton as in Press et al., Numerical Recipes, 3rd ed., §9.4 (`rtsafe`)
 */
export function monotoneRoot(evaluate: (x: number) => ValueAndSlope, start: number): RootResult {
  let lower = Number.NEGATIVE_INFINITY;
  let upper = Number.POSITIVE_INFINITY;
  let reach = 1;
  let x = Number.isFinite(start) ? start : 0;
  for (let iterations = 1; iterations <= ITERATIONS_MAX; iterations += 1) {
    const { value, slope } = evaluate(x);
    if (value === 0) return { root: x, stoppedBy: 'step', iterations };
    if (value < 0) lower = x;
    else upper = x;
    let next = x - value / slope;
    if (!Number.isFinite(next) || next <= lower || next >= upper) {
      next = insideBracket(lower, upper, reach);
      reach *= 2;
    } else if (Math.abs(next - x) > 4 * reach) {
      // A long step from a flat place is not to be trusted before a bracket exists.
      next = x + Math.sign(next - x) * 4 * reach;
      reach *= 2;
    }
    if (Math.abs(next - x) <= STEP_TOLERANCE * (1 + Math.abs(next))) {
      return { root: next, stoppedBy: 'step', iterations };
    }
    if (next <= lower || next >= upper) return { root: x, stoppedBy: 'bracket', iterations };
    x = next;
  }
  return { root: x, stoppedBy: 'limit', iterations: ITERATIONS_MAX };
}

/** The middle of the bracket, or a point `reach` beyond its only finite end. */
function insideBracket(lower: number, upper: number, reach: number): number {
  if (lower === Number.NEGATIVE_INFINITY) return upper - reach;
  if (upper === Number.POSITIVE_INFINITY) return lower + reach;
  return lower + (upper - lower) / 2;
}
