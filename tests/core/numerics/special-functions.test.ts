import { describe, expect, test } from 'vitest';
import { DomainError } from '#core/errors.ts';
import { incompleteBeta } from '#core/numerics/incomplete-beta.ts';
import { incompleteGamma } from '#core/numerics/incomplete-gamma.ts';
import { monotoneRoot } from '#core/numerics/monotone-root.ts';
import { logBeta, logGamma, logOnePlusDeviance } from '#core/numerics/stirling.ts';
import reference from '../../reference/distributions.json' with { type: 'json' };
import { expectRelative } from '../../support/relative.ts';

describe('gamma and beta', () => {
  // reference: mpmath, 360 digits, tests/reference/distributions.py.
  test.each(reference.logGamma)('log gamma at $z', ({ z, value }) => {
    const expected = Number(value);
    expect(Math.abs(logGamma(z) - expected)).toBeLessThan(1e-14 + 1e-15 * Math.abs(expected));
  });

  test.each(reference.logBeta)('log beta at $a, $b', ({ a, b, value }) => {
    const expected = Number(value);
    expect(Math.abs(logBeta(a, b) - expected)).toBeLessThan(2e-14 + 1e-15 * Math.abs(expected));
    expect(logBeta(b, a)).toBe(logBeta(a, b));
  });

  test('arguments outside the domain are refused', () => {
    expect(() => logGamma(0)).toThrow(DomainError);
    expect(() => logBeta(1, Number.NaN)).toThrow(DomainError);
    expect(() => incompleteGamma(-1, 2)).toThrow(DomainError);
    expect(() => incompleteGamma(1, -2)).toThrow(DomainError);
    expect(() => incompleteBeta({ a: 0, b: 1, x: 0.5, y: 0.5, belowMean: 0 })).toThrow(DomainError);
    expect(() => incompleteBeta({ a: 1, b: 1, x: 1.5, y: -0.5, belowMean: 0 })).toThrow(
      DomainError,
    );
  });

  test('closed forms', () => {
    // published: DLMF 8.4.8, Q(1, x) = exp(−x); DLMF 8.17.7 with b = 1, I_x(a, 1) = x^a.
    expectRelative(incompleteGamma(1, 650).upper, Math.exp(-650), 1e-13);
    const a = 9;
    const x = 1e-20;
    const tails = incompleteBeta({ a, b: 1, x, y: 1, belowMean: a - x });
    expectRelative(tails.lower, x ** a, 1e-13);
  });

  test('u − log(1 + u) keeps its digits on both sides of the switch to the series', () => {
    // The next Taylor terms u²/2 − u³/3 + u⁴/4 are exact to 1e-16 at u = 1e-5.
    const u = 1e-5;
    expectRelative(logOnePlusDeviance(u), u ** 2 / 2 - u ** 3 / 3 + u ** 4 / 4 - u ** 5 / 5, 1e-15);
    for (const end of [-0.4, 0.4]) {
      expectRelative(logOnePlusDeviance(end * (1 - 1e-15)), end - Math.log1p(end), 1e-14);
    }
  });
});

describe('the root search', () => {
  test('says what stopped it, and stays inside the bracket on a hard function', () => {
    const step = monotoneRoot(
      (x) => ({ value: Math.atan(x - 3), slope: 1 / (1 + (x - 3) ** 2) }),
      900,
    );
    expect(step.stoppedBy).not.toBe('limit');
    expectRelative(step.root, 3, 1e-14);
    const jump = monotoneRoot((x) => ({ value: x < 2 ? -1 : 1, slope: 0 }), 0);
    expect(jump.stoppedBy).not.toBe('limit');
    expectRelative(jump.root, 2, 1e-14);
  });
});
