import { describe, expect, it } from 'vitest';
import { planContrastFaults } from '#core/designs/plan-contrasts.ts';
import { checkProtocol } from '#core/protocol/check-protocol.ts';
import { type Mutable, validProtocol } from '../protocol/valid-protocol.ts';

type Draft = Mutable<ReturnType<typeof validProtocol>>;

/** Four lamps over two periods, one measure of tilt compared in all pairs. */
function twoPeriods(scheme: Draft['scheme']): Draft {
  const protocol = validProtocol();
  protocol.scheme = scheme;
  protocol.periods.count = 2;
  protocol.periods.visits = [[1], [2]];
  protocol.exclusions = [];
  protocol.measures = protocol.measures.filter(({ key }) => key === 'tilt');
  protocol.analysis.measures = protocol.analysis.measures
    .filter(({ measure }) => measure === 'tilt')
    .map((plan) => ({ ...plan, role: 'primary', primaryEstimate: 'adjusted-for-period' }));
  return protocol;
}

const list = (sequences: string[][]): Draft['scheme'] => ({ kind: 'custom-list', sequences });
const pair = (first: string, second: string) => [
  [first, second],
  [second, first],
];

// common practice, no source: what may be registered is the project's own rule
describe('planned comparisons', () => {
  it('may be made over incomplete blocks, adjusted for period', () => {
    const protocol = twoPeriods({ kind: 'balanced-incomplete-blocks', carryoverBalanced: true });
    expect(checkProtocol(protocol)).toEqual([]);
    expect(planContrastFaults(protocol)).toEqual([]);
  });

  it('may not be unadjusted over incomplete blocks', () => {
    const protocol = twoPeriods({ kind: 'balanced-incomplete-blocks', carryoverBalanced: true });
    protocol.analysis.measures[0]!.primaryEstimate = 'unadjusted';
    expect(checkProtocol(protocol)).toMatchObject([
      { pointer: '/analysis/measures/0/method', code: 'method-needs-every-condition' },
    ]);
    expect(checkProtocol(protocol)[0]!.message).toMatch(/adjusted-for-period uses everybody/);
  });

  it('may not be planned between conditions that nothing connects', () => {
    const protocol = twoPeriods(
      list([...pair('warm.open', 'warm.shaded'), ...pair('cold.open', 'cold.shaded')]),
    );
    expect(planContrastFaults(protocol)).toEqual([
      {
        pointer: '/analysis/measures/0/contrasts',
        code: 'contrast-not-estimable',
        message: expect.stringContaining('warm.open and cold.open, warm.open and cold.shaded'),
      },
    ]);
    protocol.analysis.measures[0]!.primaryEstimate = 'unadjusted';
    expect(planContrastFaults(protocol)).toEqual([]);
  });

  it('may be planned against a reference when that is connected with all', () => {
    const star = ['warm.shaded', 'cold.open', 'cold.shaded'].flatMap((key) =>
      pair('warm.open', key),
    );
    const protocol = twoPeriods(list(star));
    expect(planContrastFaults(protocol)).toEqual([]);
  });

  it('may not be confounded with period', () => {
    const protocol = validProtocol();
    protocol.scheme = list([['warm.open', 'warm.shaded', 'cold.open', 'cold.shaded']]);
    expect(checkProtocol(protocol)).toEqual([]);
    // The reading time alone is adjusted for period; it is compared against one reference.
    expect(planContrastFaults(protocol)).toMatchObject([
      { pointer: '/analysis/measures/0/contrasts', code: 'contrast-not-estimable' },
    ]);
  });

  it('leave out a condition for familiarisation, which everybody meets first', () => {
    const protocol = validProtocol();
    const constraints = [{ kind: 'familiarisation-first' as const, condition: 'cold.open' }];
    protocol.scheme = { kind: 'constrained-permutations', constraints };
    expect(checkProtocol(protocol)).toEqual([]);
    expect(planContrastFaults(protocol)).toEqual([]);
    // The same orders, but without saying what the first condition is for
    protocol.scheme = {
      kind: 'constrained-permutations',
      constraints: [{ kind: 'always-in-periods', condition: 'cold.open', periods: [1] }],
    };
    expect(planContrastFaults(protocol)[0]!.message).toMatch(
      /warm.open and cold.open adjusted for period; .* more than one order/,
    );
  });

  it('are not looked at while the scheme is faulty', () => {
    const protocol = twoPeriods(list([]));
    expect(planContrastFaults(protocol)).toEqual([]);
  });
});
