import { DomainError } from '../errors.ts';

/** Squares and their sums stay far from overflow below this; no measure of people comes near. */
export const MAGNITUDE_MAX = 1e100;

/** Rounding of a mean or contrast, relative to the largest value: 64 units in the last place. */
const ROUNDING_RELATIVE = 2 ** -46;

/**
 * The largest absolute value.
 *
 * @throws {DomainError} when a value is not finite, or so large that its square could overflow
 */
export function largestMagnitude(values: ArrayLike<number>): number {
  let largest = 0;
  for (let index = 0; index < values.length; index += 1) {
    const magnitude = Math.abs(values[index]!);
    if (!(magnitude <= MAGNITUDE_MAX)) {
      throw new DomainError(`Value ${index} is ${values[index]}; it must be finite, below 1e100.`);
    }
    if (magnitude > largest) largest = magnitude;
  }
  return largest;
}

/**
 * Whether a sum of `count` squared deviations is what rounding alone leaves of values as large as
 * `magnitude`: then it is zero for all that double precision can tell.
 */
export function isRoundingOnly(sumOfSquares: number, count: number, magnitude: number): boolean {
  return sumOfSquares <= count * (ROUNDING_RELATIVE * magnitude) ** 2;
}
