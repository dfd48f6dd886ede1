import jstat from 'jstat';
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
  normalQuantile,
  normalSurvival,
  normalSurvivalQuantile,
} from '#core/distributions/normal.ts';
import {
  studentTCdf,
  studentTQuantile,
  studentTSurvival,
  studentTSurvivalQuantile,
} from '#core/distributions/student-t.ts';
import reference from '../../reference/distributions.json' with { type: 'json' };
import { relativeError } from '../../support/relative.ts';

// reference: mpmath, 360 digits, tests/reference/distributions.py. Target 1e-12 relative.
const TARGET = 1e-12;

interface Inverse {
  readonly p: number;
  readonly x: string;
}
interface Point {
  readonly lower: string;
  readonly upper: string;
  readonly lowerQuantile?: Inverse | null;
  readonly upperQuantile?: Inverse | null;
}
interface Family {
  readonly cdf: number;
  readonly survival: number;
  readonly quantile: (p: number) => number;
  readonly survivalQuantile: (p: number) => number;
  readonly name: string;
}

/** Collects every error above the target, so that a failure names all the points at fault. */
function faultsOf<P extends Point>(points: readonly P[], family: (point: P) => Family): string[] {
  const faults: string[] = [];
  const check = (name: string, actual: number, expected: number) => {
    const error = relativeError(actual, expected);
    if (!(error <= TARGET)) faults.push(`${name}: ${actual} for ${expected}, error ${error}`);
  };
  for (const point of points) {
    const { cdf, survival, quantile, survivalQuantile, name } = family(point);
    if (Number(point.lower) >= 1e-300) check(`${name} cdf`, cdf, Number(point.lower));
    if (Number(point.upper) >= 1e-300) check(`${name} survival`, survival, Number(point.upper));
    const { lowerQuantile, upperQuantile } = point;
    if (lowerQuantile) {
      const { p, x } = lowerQuantile;
      check(`${name} quantile of ${p}`, quantile(p), Number(x));
    }
    if (upperQuantile) {
      const { p, x } = upperQuantile;
      check(`${name} survival quantile of ${p}`, survivalQuantile(p), Number(x));
    }
  }
  return faults;
}

describe('both tails and quantiles to 1e-12', () => {
  test('Student t, 1 to a million degrees of freedom', () => {
    expect(reference.studentT.length).toBeGreaterThan(200);
    const faults = faultsOf(reference.studentT, ({ t, df }) => ({
      cdf: studentTCdf(t, df),
      survival: studentTSurvival(t, df),
      quantile: (p) => studentTQuantile(p, df),
      survivalQuantile: (p) => studentTSurvivalQuantile(p, df),
      name: `t = ${t}, df = ${df}`,
    }));
    expect(faults).toEqual([]);
  });

  test('Fisher F', () => {
    expect(reference.fisherF.length).toBeGreaterThan(200);
    const faults = faultsOf(reference.fisherF, ({ f, df1, df2 }) => ({
      cdf: fisherFCdf(f, df1, df2),
      survival: fisherFSurvival(f, df1, df2),
      quantile: (p) => fisherFQuantile(p, df1, df2),
      survivalQuantile: (p) => fisherFSurvivalQuantile(p, df1, df2),
      name: `F = ${f}, df = ${df1}, ${df2}`,
    }));
    expect(faults).toEqual([]);
  });

  test('chi-square', () => {
    expect(reference.chiSquare.length).toBeGreaterThan(150);
    const faults = faultsOf(reference.chiSquare, ({ x, df }) => ({
      cdf: chiSquareCdf(x, df),
      survival: chiSquareSurvival(x, df),
      quantile: (p) => chiSquareQuantile(p, df),
      survivalQuantile: (p) => chiSquareSurvivalQuantile(p, df),
      name: `x = ${x}, df = ${df}`,
    }));
    expect(faults).toEqual([]);
  });

  test('normal', () => {
    const faults = faultsOf(reference.normal, ({ z }) => ({
      cdf: normalCdf(z),
      survival: normalSurvival(z),
      quantile: (p) => normalQuantile(p),
      survivalQuantile: (p) => normalSurvivalQuantile(p),
      name: `z = ${z}`,
    }));
    expect(faults).toEqual([]);
  });
});

describe('why jstat only starts the searches', () => {
  test('its inverses are close in the body: within 1e-3 of the reference', () => {
    // reference: mpmath as above. P(T > 2.3 | 10) and its like lie in the table of points.
    const near = reference.studentT.find(({ t, df }) => t === 2.3 && df === 10);
    const p = near?.upperQuantile?.p ?? Number.NaN;
    expect(relativeError(-jstat.studentt.inv(p, 10), 2.3)).toBeLessThan(1e-3);
    expect(relativeError(-jstat.normal.inv(0.025, 0, 1), 1.959963984540054)).toBeLessThan(1e-3);
  });
});
