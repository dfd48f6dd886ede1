import { expect } from 'vitest';

/** |actual − expected| / |expected|; the absolute error where zero is expected. */
export function relativeError(actual: number, expected: number): number {
  const difference = Math.abs(actual - expected);
  return expected === 0 ? difference : difference / Math.abs(expected);
}

/** Fails when actual and expected differ relatively by more than `tolerance`; NaN always fails. */
export function expectRelative(
  actual: number,
  expected: number,
  tolerance: number,
  what = 'value',
): void {
  const error = relativeError(actual, expected);
  expect(
    error <= tolerance,
    `${what}: got ${actual}, expected ${expected}, relative error ${error} > ${tolerance}`,
  ).toBe(true);
}
