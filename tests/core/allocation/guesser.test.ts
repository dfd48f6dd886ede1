import { describe, expect, it } from 'vitest';
import { type Foresight, foresightOf, type Place } from '#core/allocation/foresight.ts';
import { createGuesser } from '#core/allocation/guesser.ts';
import { randomStream } from '#core/numerics/generator.ts';
import type { PolicyChoice } from '#core/protocol/protocol.ts';
import { setOf } from './arrivals.ts';

const set = setOf('williams', 2);
const SEEN = { siteId: 'own', stratum: 'all' };
const HIDDEN = { siteId: 'other', stratum: 'all' };

const studyOnly: PolicyChoice = {
  kind: 'minimisation',
  imbalance: 'variance',
  weights: { site: 0, study: 1, factors: [] },
  bestProbability: 0.9,
};

/** A slot that was seen carries a sequence; one that was not, none. */
type Event = readonly [Place, number | null];

/** The plain slow way: every course of the hidden slots, weighed by what was seen. */
function exactProbabilities(policy: PolicyChoice, events: readonly Event[], place: Place) {
  let courses: { foresight: Foresight; weight: number }[] = [
    { foresight: foresightOf({ set, policy, factorKeys: [] }), weight: 1 },
  ];
  for (const [where, seen] of events) {
    courses = courses.flatMap(({ foresight, weight }) =>
      foresight.probabilities(where).flatMap((chance, index) => {
        if (chance === 0 || (seen !== null && seen !== index)) return [];
        const next = foresight.copy();
        next.record(where, index);
        return [{ foresight: next, weight: weight * chance }];
      }),
    );
  }
  const total = courses.reduce((sum, { weight }) => sum + weight, 0);
  return set.sequences.map((_, index) =>
    courses.reduce(
      (sum, { foresight, weight }) =>
        sum + (weight / total) * (foresight.probabilities(place)[index] ?? 0),
      0,
    ),
  );
}

function guessed(policy: PolicyChoice, events: readonly Event[], place: Place, imagined: number) {
  const stream = randomStream('00000000000000c7', 0);
  const guesser = createGuesser({ set, policy, factorKeys: [] }, { imagined, stream });
  for (const [where, seen] of events) {
    if (seen === null) guesser.miss(where);
    else guesser.see(where, seen);
  }
  return guesser.probabilities(place);
}

describe('a guesser', () => {
  const own = (sequence: number): Event => [SEEN, sequence];
  const other: Event = [HIDDEN, null];
  const hidden: Event = [SEEN, null];

  // reference: full enumeration of the hidden slots, in this file. Once the effective number of the
  // 20,000 imagined studies falls below 10,000 they are resampled, so that even at 8000 the standard
  // error is at most 0.5/√8000 = 0.0056; the bound is more than five of them.
  it.each<[string, PolicyChoice, readonly Event[]]>([
    ['other sites count too', studyOnly, [other, own(0), own(0), other, own(0), own(0), own(1)]],
    ['the rule was rarely followed', studyOnly, [own(1), own(1), own(1), other, other, own(0)]],
    ['margins decide ties', { kind: 'balanced' }, [other, own(0), other, own(1), other, other]],
    [
      'blocks have hidden sizes and slots',
      { kind: 'permuted-blocks', multiples: [1, 2] },
      [hidden, own(0), own(0), hidden, hidden, own(1), own(1), hidden],
    ],
    [
      'what is seen rules most of the imagined out',
      { kind: 'permuted-blocks', multiples: [3] },
      [hidden, hidden, hidden, own(0), own(0)],
    ],
  ])('comes near the exact probabilities: %s', (_, policy, events) => {
    const exact = exactProbabilities(policy, events, SEEN);
    const ours = guessed(policy, events, SEEN, 20_000);
    // 20,000 weights of rounding 1e-16 each.
    expect(ours[0]! + ours[1]!).toBeCloseTo(1, 10);
    expect(Math.abs(ours[0]! - exact[0]!)).toBeLessThan(0.03);
  });

  it('weighs hidden slots by what was seen after them', () => {
    // By hand: three of a block of three each are hidden, then two zeros are seen. With k zeros
    // hidden, as likely as 1, 9, 9, 1 in 20, that has probability 1, 1/3, 0, 0. One more zero is
    // certain with k = 0 and impossible with k = 1: 1 / (1 + 9/3) = 1/4.
    const policy: PolicyChoice = { kind: 'permuted-blocks', multiples: [3] };
    const events = [hidden, hidden, hidden, own(0), own(0)];
    expect(exactProbabilities(policy, events, SEEN)[0]).toBeCloseTo(1 / 4, 12);
  });

  it('is exact with one imagined study when nothing is hidden', () => {
    const events = [own(0), own(0), own(1), own(0)];
    for (const policy of [studyOnly, { kind: 'permuted-blocks', multiples: [2, 3] } as const]) {
      const exact = exactProbabilities(policy, events, SEEN);
      for (const [index, chance] of guessed(policy, events, SEEN, 1).entries()) {
        expect(chance).toBeCloseTo(exact[index] ?? 0, 12);
      }
    }
  });

  it('goes on when everything it imagined is contradicted', () => {
    // No block of one each holds the same sequence three times, so nothing imagined can fit.
    const policy: PolicyChoice = { kind: 'permuted-blocks', multiples: [1] };
    const events = [own(0), own(0), own(0)];
    expect(guessed(policy, events, SEEN, 8)).toEqual([0.5, 0.5]);
  });
});
