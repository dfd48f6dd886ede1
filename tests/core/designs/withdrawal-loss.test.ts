import { describe, expect, it } from 'vitest';
import { cyclicLatinSquare } from '#core/designs/cyclic-latin-square.ts';
import { designEfficiency, type EffectEfficiency } from '#core/designs/efficiency.ts';
import { williamsSquare } from '#core/designs/williams.ts';
import { type WithdrawalLoss, withdrawalLoss } from '#core/designs/withdrawal-loss.ts';

const seed = '00000000000000a1';
const EFFECTS = ['direct', 'directAdjusted', 'carryover'] as const;

/** Average variance of the pairs, or null when one cannot be estimated. */
function averageVariance({ contrasts }: EffectEfficiency): number | null {
  let sum = 0;
  for (const { variance } of contrasts) {
    if (!variance.estimable) return null;
    sum += variance.value;
  }
  return sum / contrasts.length;
}

/** Every set of `size` participants, one by one. */
function subsets(count: number, size: number, from = 0): number[][] {
  if (size === 0) return [[]];
  const result: number[][] = [];
  for (let first = from; first < count; first += 1) {
    for (const rest of subsets(count, size - 1, first + 1)) result.push([first, ...rest]);
  }
  return result;
}

/** The plain way: every set of participants, each design built anew. */
function plainLoss(
  participants: readonly (readonly number[])[],
  size: number,
  withdrawals: number,
  afterPeriod: number,
) {
  const replication = participants.flat().filter((condition) => condition === 0).length;
  return EFFECTS.map((effect) => {
    const values = subsets(participants.length, withdrawals).map((leaving) => {
      const left = participants.map((row, index) =>
        leaving.includes(index) ? row.slice(0, afterPeriod) : row,
      );
      const average = averageVariance(designEfficiency(left, size)[effect]);
      return average === null ? null : 2 / replication / average;
    });
    const found = values.filter((value) => value !== null);
    return {
      expected: found.reduce((a, b) => a + b, 0) / found.length,
      worst: Math.min(...found),
      notEstimableShare: 1 - found.length / values.length,
    };
  });
}

function entryOf(losses: readonly WithdrawalLoss[], withdrawals: number, afterPeriod: number) {
  const entry = losses.find(
    (loss) => loss.withdrawals === withdrawals && loss.afterPeriod === afterPeriod,
  );
  if (entry === undefined) throw new Error('There is no such entry');
  return entry;
}

describe('the loss under withdrawals', () => {
  it.each([
    ['Williams, three conditions', williamsSquare(3), 3, 1, 3],
    ['Williams, four conditions, two blocks', williamsSquare(4), 4, 2, 3],
    ['cyclic, four conditions', cyclicLatinSquare(4), 4, 1, 4],
    ['repeated rows', [...williamsSquare(3), ...cyclicLatinSquare(3)], 3, 1, 2],
  ])('is that of every set of participants: %s', (_, rows, size, blocks, withdrawalsMax) => {
    const options = { blocks, withdrawalsMax, casesMax: 5000, seed };
    const losses = withdrawalLoss(rows, size, options);
    expect(losses).toHaveLength(withdrawalsMax * (size - 1));
    const participants = Array.from({ length: blocks }, () => rows).flat();
    for (const loss of losses) {
      expect(loss.basis.kind).toBe('enumerated');
      const plain = plainLoss(participants, size, loss.withdrawals, loss.afterPeriod);
      for (const [index, effect] of EFFECTS.entries()) {
        const { expected, worst, notEstimableShare } = loss[effect];
        const other = plain[index]!;
        expect(notEstimableShare).toBeCloseTo(other.notEstimableShare, 10);
        if (expected.estimable) expect(expected.value).toBeCloseTo(other.expected, 10);
        else expect(other.notEstimableShare).toBe(1);
        if (worst.estimable) expect(worst.value).toBeCloseTo(other.worst, 10);
        else expect(other.notEstimableShare).toBeGreaterThan(0);
      }
    }
  });

  it('is nothing to speak of but the observations when all withdraw before the last period', () => {
    // By hand: every participant of Williams' square of four stops after period 3: each condition
    // has 3 of its 4 observations and the layout is that of the first three periods, whose plain
    // efficiency is λt/(rk) = 2·4/(3·3) = 8/9, so 3/4 of that is left of the complete ideal.
    const options = { blocks: 1, withdrawalsMax: 4, casesMax: 100, seed };
    const all = entryOf(withdrawalLoss(williamsSquare(4), 4, options), 4, 3);
    expect(all.basis).toEqual({ kind: 'enumerated', cases: 1 });
    expect(all.direct.expected).toEqual({ estimable: true, value: expect.closeTo(2 / 3, 12) });
    expect(all.direct.worst).toEqual({ estimable: true, value: expect.closeTo(2 / 3, 12) });
  });

  it('names designs that fall apart', () => {
    // By hand: of AB and BA, whoever leaves after the first period takes the period effect with him.
    const options = { blocks: 1, withdrawalsMax: 2, casesMax: 100, seed };
    const losses = withdrawalLoss(
      [
        [0, 1],
        [1, 0],
      ],
      2,
      options,
    );
    for (const loss of losses) {
      expect(loss.direct.notEstimableShare).toBe(1);
      expect(loss.direct.expected).toMatchObject({ estimable: false, reason: 'disconnected' });
      expect(loss.direct.worst).toMatchObject({ estimable: false, reason: 'disconnected' });
    }
  });

  it('when sampled is near the enumerated, and the same for the same seed', () => {
    const rows = williamsSquare(5);
    const exact = withdrawalLoss(rows, 5, { blocks: 2, withdrawalsMax: 4, casesMax: 10_000, seed });
    const options = { blocks: 2, withdrawalsMax: 4, casesMax: 400, seed };
    const sampled = withdrawalLoss(rows, 5, options);
    expect(withdrawalLoss(rows, 5, options)).toEqual(sampled);
    const [one, other] = [entryOf(exact, 4, 2), entryOf(sampled, 4, 2)];
    expect(one.basis.kind).toBe('enumerated');
    expect(other.basis).toEqual({
      kind: 'simulated',
      cases: 400,
      generator: { name: 'philox4x32-10', version: 1 },
    });
    for (const effect of EFFECTS) {
      const [a, b] = [one[effect], other[effect]];
      if (!a.expected.estimable || !b.expected.estimable) throw new Error('not estimable');
      if (!a.worst.estimable || !b.worst.estimable) throw new Error('not estimable');
      // The values lie between the worst and 1, so the mean of 400 has a standard error of at most
      // (1 − worst)/40; five of those fail once in a million seeds.
      expect(Math.abs(a.expected.value - b.expected.value)).toBeLessThan((1 - a.worst.value) / 8);
      expect(b.worst.value).toBeGreaterThanOrEqual(a.worst.value - 1e-12);
    }
  });

  it.each([
    [{ blocks: 0 }, /blocks is a whole number/],
    [{ withdrawalsMax: 4 }, /4 of 3 participants/],
    [{ casesMax: 1.5 }, /casesMax/],
    [{ casesMax: 1, seed: 'no' }, /16 lower-case/],
  ])('refuses %j', (changes, message) => {
    const options = { blocks: 1, withdrawalsMax: 1, casesMax: 100, seed, ...changes };
    expect(() => withdrawalLoss(cyclicLatinSquare(3), 3, options)).toThrow(message);
  });
});
