import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import {
  chiSquareCdf,
  chiSquareQuantile,
  chiSquareSurvival,
  chiSquareSurvivalQuantile,
} from '#core/distributions/chi-square.ts';
import {
  fisherFCdf,
  fisherFQuantile,
  fisherFSurvival,
  fisherFSurvivalQuantile,
} from '#core/distributions/fisher-f.ts';
import {
  normalCdf,
  normalDraw,
  normalQuantile,
  normalSurvival,
} from '#core/distributions/normal.ts';
import {
  studentTCdf,
  studentTQuantile,
  studentTSurvival,
  studentTSurvivalQuantile,
  studentTTwoSided,
} from '#core/distributions/student-t.ts';
import { DomainError } from '#core/errors.ts';
import { randomStream } from '#core/numerics/generator.ts';
import { expectRelative } from '../../support/relative.ts';

const degrees = fc.oneof(
  fc.integer({ min: 1, max: 1_000_000 }),
  fc.double({ min: 0.6, max: 500, noNaN: true }),
);
const exponent = fc.double({ min: -300, max: -0.4, noNaN: true });

const families = [
  {
    name: 'Student t',
    cdf: (x: number, a: number, _: number) => studentTCdf(x, a),
    survival: (x: number, a: number, _: number) => studentTSurvival(x, a),
    quantile: (p: number, a: number, _: number) => studentTQuantile(p, a),
    survivalQuantile: (p: number, a: number, _: number) => studentTSurvivalQuantile(p, a),
  },
  {
    name: 'chi-square',
    cdf: (x: number, a: number, _: number) => chiSquareCdf(x * a, a),
    survival: (x: number, a: number, _: number) => chiSquareSurvival(x * a, a),
    quantile: (p: number, a: number, _: number) => chiSquareQuantile(p, a) / a,
    survivalQuantile: (p: number, a: number, _: number) => chiSquareSurvivalQuantile(p, a) / a,
  },
  {
    name: 'Fisher F',
    cdf: fisherFCdf,
    survival: fisherFSurvival,
    quantile: fisherFQuantile,
    survivalQuantile: fisherFSurvivalQuantile,
  },
] as const;

describe.each(families)('$name', ({ cdf, survival, quantile, survivalQuantile }) => {
  const positive = fc.double({ min: 1e-6, max: 1e6, noNaN: true });

  test('the tails lie in [0, 1] and sum to 1', () => {
    fc.assert(
      fc.property(positive, degrees, degrees, (x, a, b) => {
        const lower = cdf(x, a, b);
        const upper = survival(x, a, b);
        expect(lower >= 0 && lower <= 1 && upper >= 0 && upper <= 1).toBe(true);
        expect(Math.abs(lower + upper - 1)).toBeLessThan(1e-13);
      }),
    );
  });

  test('the survival function never increases', () => {
    const factor = fc.double({ min: 1 + 1e-9, max: 10, noNaN: true });
    fc.assert(
      fc.property(positive, factor, degrees, degrees, (x, times, a, b) => {
        const here = survival(x, a, b);
        // Neighbouring values may differ by rounding of the tails, whose target is 1e-12.
        expect(survival(x * times, a, b)).toBeLessThanOrEqual(here * (1 + 2e-12));
      }),
    );
  });

  test('quantiles invert both tails, down to 1e-300', () => {
    // Beyond this range x is subnormal or overflows, and no longer holds its digits.
    const inRange = (x: number) => Math.abs(x) > 1e-300 && Math.abs(x) < 1e300;
    fc.assert(
      fc.property(exponent, degrees, degrees, (power, a, b) => {
        const p = 10 ** power;
        const high = survivalQuantile(p, a, b);
        const low = quantile(p, a, b);
        if (inRange(high)) {
          const error = Math.abs(Math.log(survival(high, a, b)) - Math.log(p));
          expect(error).toBeLessThan(slack(p, a, b));
        }
        if (inRange(low)) {
          const error = Math.abs(Math.log(cdf(low, a, b)) - Math.log(p));
          expect(error).toBeLessThan(slack(p, a, b));
        }
      }),
      { numRuns: 200 },
    );
  });
});

/**
 * What one rounding of x and one of log p may move log p by: the slope of log p against log x is
 * below 2·|log p|·√(a + b) + min(a, b) in these families.
 */
function slack(p: number, a: number, b: number): number {
  const slope = 2 * Math.abs(Math.log(p)) * Math.sqrt(a + b) + Math.min(a, b);
  return 1e-12 + 8 * 2 ** -53 * slope;
}

describe('relations between distributions', () => {
  test('t squared is F with one numerator degree of freedom', () => {
    fc.assert(
      fc.property(fc.double({ min: 0.01, max: 30, noNaN: true }), degrees, (t, df) => {
        const twoSided = studentTTwoSided(t, df);
        if (twoSided > 1e-300) expectRelative(fisherFSurvival(t * t, 1, df), twoSided, 1e-11);
      }),
    );
  });

  test('infinite degrees of freedom are the normal and chi-square limits', () => {
    expect(studentTSurvival(1.3, Number.POSITIVE_INFINITY)).toBe(normalSurvival(1.3));
    expect(studentTQuantile(0.9, Number.POSITIVE_INFINITY)).toBe(normalQuantile(0.9));
    expectRelative(fisherFSurvival(2, 3, Number.POSITIVE_INFINITY), chiSquareSurvival(6, 3), 1e-14);
  });

  test('symmetry', () => {
    expect(studentTCdf(-1.7, 4)).toBe(studentTSurvival(1.7, 4));
    expect(normalCdf(-0.4)).toBe(normalSurvival(0.4));
    expectRelative(fisherFCdf(0.25, 3, 8), fisherFSurvival(4, 8, 3), 1e-13);
  });
});

describe('edges', () => {
  test('a quantile beyond the largest double is infinite', () => {
    // From the tail's leading power: t is about (1e-300)^(-1/0.5), far above 1.8e308.
    expect(studentTSurvivalQuantile(1e-300, 0.5)).toBe(Number.POSITIVE_INFINITY);
  });

  test('ends of the range', () => {
    expect(studentTSurvival(Number.POSITIVE_INFINITY, 3)).toBe(0);
    expect(studentTSurvival(Number.NEGATIVE_INFINITY, 3)).toBe(1);
    expect(studentTSurvival(0, 3)).toBe(0.5);
    expect(studentTSurvivalQuantile(0, 3)).toBe(Number.POSITIVE_INFINITY);
    expect(studentTSurvivalQuantile(1, 3)).toBe(Number.NEGATIVE_INFINITY);
    expect(studentTSurvivalQuantile(0.5, 3)).toBe(0);
    expect(fisherFSurvival(0, 2, 3)).toBe(1);
    expect(fisherFSurvival(-1, 2, 3)).toBe(1);
    expect(fisherFCdf(Number.POSITIVE_INFINITY, 2, 3)).toBe(1);
    expect(fisherFQuantile(0, 2, 3)).toBe(0);
    expect(fisherFSurvivalQuantile(0, 2, 3)).toBe(Number.POSITIVE_INFINITY);
    expect(chiSquareCdf(0, 2)).toBe(0);
    expect(chiSquareQuantile(1, 2)).toBe(Number.POSITIVE_INFINITY);
    expect(normalQuantile(0)).toBe(Number.NEGATIVE_INFINITY);
  });

  test('arguments outside the domain are refused', () => {
    expect(() => studentTSurvival(Number.NaN, 3)).toThrow(DomainError);
    expect(() => studentTSurvival(1, 0)).toThrow(DomainError);
    expect(() => studentTQuantile(1.1, 3)).toThrow(DomainError);
    expect(() => studentTQuantile(Number.NaN, 3)).toThrow(DomainError);
    expect(() => fisherFSurvival(1, -1, 3)).toThrow(DomainError);
    expect(() => fisherFSurvival(Number.NaN, 1, 3)).toThrow(DomainError);
    expect(() => chiSquareSurvival(1, Number.NaN)).toThrow(DomainError);
    expect(() => normalSurvival(Number.NaN)).toThrow(DomainError);
  });
});

test('normal draws have the moments of the normal distribution', () => {
  const stream = randomStream('0123456789abcdef', 3);
  const draws = Array.from({ length: 20_000 }, () => normalDraw(stream));
  const mean = draws.reduce((sum, draw) => sum + draw, 0) / draws.length;
  const variance = draws.reduce((sum, draw) => sum + draw * draw, 0) / draws.length;
  // Bounds of five standard errors: they fail less than once in a million seeds.
  expect(Math.abs(mean)).toBeLessThan(5 / Math.sqrt(draws.length));
  expect(Math.abs(variance - 1)).toBeLessThan(5 * Math.sqrt(2 / draws.length));
});
