import { developedCyclically } from './cyclic-latin-square.ts';

/**
 * Williams' square, balanced for first-order carryover: every condition stands once in each period,
 * and every ordered pair of conditions is adjacent equally often: once in the one square of an even
 * number of conditions, twice in the pair of squares of an odd number.
 *
 * The first row is 0, 1, n−1, 2, n−2, …; its successive differences are all different modulo n
 * when n is even, so developing it cyclically gives every ordered pair once. When n is odd, the
 * second square is the first with every row reversed.
 * Source: Williams 1949, Australian Journal of Scientific Research A 2:149–168; the same first row
 * in Bradley 1958, Journal of the American Statistical Association 53:525–528.
 *
 * @param conditionCount n ≥ 2
 * @returns n rows (n even) or 2n rows (n odd) of n condition indices from 0
 * @throws {DomainError} when conditionCount is below 2
 */
export function williamsSquare(conditionCount: number): number[][] {
  const square = developedCyclically(williamsFirstRow(conditionCount));
  return conditionCount % 2 === 0 ? square : [...square, ...square.map((row) => row.toReversed())];
}

function williamsFirstRow(conditionCount: number): number[] {
  return Array.from({ length: conditionCount }, (_, periodIndex) => {
    const step = Math.ceil(periodIndex / 2);
    return periodIndex % 2 === 1 || step === 0 ? step : conditionCount - step;
  });
}
