import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { designInformation } from '#core/designs/information.ts';
import { allPairs, criterionValue, weightMatrix } from '#core/designs/search/criterion.ts';
import { exponentialDraw } from '#core/designs/search/exponential-draw.ts';
import { applyMove, emptyVisit, valueAfter, visitParticipant } from '#core/designs/search/moves.ts';
import {
  movingInformation,
  recomputeFromScratch,
} from '#core/designs/search/moving-information.ts';
import { randomStream } from '#core/numerics/generator.ts';
import { SEED } from './search-cases.ts';

/** Designs with a criterion of each kind, and sequences given beside, some of them cut short. */
const designs = fc
  .record({ t: fc.integer({ min: 2, max: 6 }), p: fc.integer({ min: 2, max: 7 }) })
  .chain(({ t, p }) => {
    const condition = fc.nat({ max: t - 1 });
    return fc.record({
      t: fc.constant(t),
      p: fc.constant(p),
      sequences: fc.array(fc.array(condition, { minLength: p, maxLength: p }), {
        minLength: 3,
        maxLength: 12,
      }),
      given: fc.array(fc.array(condition, { minLength: 1, maxLength: p }), { maxLength: 3 }),
      carryoverInModel: fc.boolean(),
      carryoverWeight: fc.constantFrom(0, 0.5),
      moves: fc.array(
        fc.record({
          row: fc.nat(),
          period: fc.nat({ max: p - 1 }),
          partner: fc.nat({ max: p }),
          next: condition,
        }),
        { minLength: 1, maxLength: 30 },
      ),
    });
  });

/** Beyond this, in units of σ², some comparison is not determined and only the ridge holds it. */
const DETERMINED_MAX = 1000;

describe('the updated criterion', () => {
  it('is the recomputed one to 1e-9 after every move, and the plain one without the ridge', () => {
    let compared = 0;
    let plain = 0;
    fc.assert(
      fc.property(designs, ({ t, p, sequences, given, moves, ...kind }) => {
        const { carryoverInModel, carryoverWeight } = kind;
        const criterion = {
          carryoverInModel,
          direct: allPairs(t),
          carryover: carryoverInModel ? allPairs(t, carryoverWeight) : [],
        };
        const weights = weightMatrix(criterion, t);
        const moving = movingInformation(t, p, Int32Array.from(sequences.flat()), given, weights);
        const visit = emptyVisit(moving);
        for (const { row, period, partner, next } of moves) {
          visitParticipant(visit, row % sequences.length);
          const comes = partner < p ? visit.sequence[partner]! : next;
          if (comes === visit.sequence[period]) continue;
          const before = moving.value;
          const predicted = valueAfter(visit, period, partner, comes);
          applyMove(visit, period, partner, comes);
          const updated = moving.value;
          const scratch = movingInformation(
            t,
            p,
            Int32Array.from(moving.sequences),
            given,
            weights,
          );
          if (Math.max(before, scratch.value) < DETERMINED_MAX) {
            compared += 1;
            expect(Math.abs(predicted - scratch.value)).toBeLessThan(1e-9 * scratch.value);
            expect(Math.abs(updated - scratch.value)).toBeLessThan(1e-9 * scratch.value);
          } else recomputeFromScratch(moving);
          const rows = sequences.map((_, index) =>
            Array.from(moving.sequences.subarray(index * p, (index + 1) * p)),
          );
          const information = designInformation([...given, ...rows], t);
          const { averageVariance } = criterionValue(information, criterion);
          if (averageVariance !== null && averageVariance < 10) {
            plain += 1;
            // The ridge takes at most 1e-6·variance of a variance v away, summed over effects.
            expect(Math.abs(moving.value / averageVariance - 1)).toBeLessThan(1e-3);
          } else if (averageVariance === null) expect(moving.value).toBeGreaterThan(DETERMINED_MAX);
        }
      }),
      { numRuns: 600, seed: 17 },
    );
    expect(compared).toBeGreaterThan(1000);
    expect(plain).toBeGreaterThan(1000);
  });
});

describe('exponential draws', () => {
  it('have the mean and the tails of the exponential distribution', () => {
    // published: P(E > x) = exp(−x), mean and variance 1. Bounds are 5 standard errors.
    const stream = randomStream(SEED, 7);
    const draws = Array.from({ length: 100_000 }, () => exponentialDraw(stream));
    const mean = draws.reduce((sum, value) => sum + value, 0) / draws.length;
    expect(Math.abs(mean - 1)).toBeLessThan(5 / Math.sqrt(draws.length));
    for (const bound of [0.1, 0.5, 1, 1.5, 2, 4]) {
      const chance = Math.exp(-bound);
      const share = draws.filter((value) => value > bound).length / draws.length;
      const error = Math.sqrt((chance * (1 - chance)) / draws.length);
      expect(Math.abs(share - chance)).toBeLessThan(5 * error);
    }
  });
});
