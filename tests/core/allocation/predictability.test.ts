import { describe, expect, it } from 'vitest';
import { foresightOf } from '#core/allocation/foresight.ts';
import { predictability, type SimulatedEnrolment } from '#core/allocation/predictability.ts';
import type { SequenceSet } from '#core/allocation/tally.ts';
import type { PolicyChoice } from '#core/protocol/protocol.ts';
import { openStudy, secretOf, setOf } from './arrivals.ts';

const TWO = setOf('williams', 2);
const FOUR = setOf('williams', 4);
const BALANCED: PolicyChoice = { kind: 'balanced' };

function minimising(bestProbability: number): PolicyChoice {
  const factors = [{ factor: 'stratum', weight: 2 }];
  const weights = { site: 1, study: 1, factors };
  return { kind: 'minimisation', imbalance: 'variance', weights, bestProbability };
}

function estimated(
  set: SequenceSet,
  policy: PolicyChoice,
  changes: Partial<SimulatedEnrolment> = {},
) {
  return predictability(
    { set, policy, factorKeys: ['stratum'] },
    {
      sites: 1,
      stationsPerSite: 1,
      participantsPerSite: 24,
      strata: ['all'],
      studies: 200,
      imagined: 16,
      seed: '00000000000000a5',
      ...changes,
    },
  );
}

/** Fails once in a million seeds when the estimate has the expectation. */
function expectWithin(
  { estimate, standardError }: { estimate: number; standardError: number },
  expected: number,
): void {
  expect(Math.abs(estimate - expected)).toBeLessThan(4.9 * standardError + 1e-12);
}

describe('somebody who sees the whole study', () => {
  it('guesses an ordered block of four by counting what is left', () => {
    // published: with r sequences left one guess in r is right: (1/4 + 1/3 + 1/2 + 1) / 4 = 25/48
    for (const policy of [BALANCED, { kind: 'permuted-blocks', multiples: [1] } as const]) {
      const { study, site, station, chance } = estimated(FOUR, policy);
      expect(study.estimate).toBeCloseTo(25 / 48, 12);
      expect(study.standardError).toBeCloseTo(0, 12);
      expect(chance).toBe(0.25);
      expect([site, station]).toEqual([study, study]);
    }
  });

  it.each([2, 3])('guesses a block of twice %i slots as Blackwell and Hodges say', (half) => {
    // published: Blackwell & Hodges 1957 (Annals of Mathematical Statistics 28:449–460), from
    // memory: n + (4^n / C(2n, n) − 1)/2 right guesses in 2n; for n = 2 added up by hand as well:
    // 1/2 + 2/3 + 2/3 + 1.
    const binomial = half === 2 ? 6 : 20;
    const right = half + (4 ** half / binomial - 1) / 2;
    const policy: PolicyChoice = { kind: 'permuted-blocks', multiples: [half] };
    const { study } = estimated(TWO, policy, { participantsPerSite: 12 * half, studies: 300 });
    expectWithin(study, right / (2 * half));
  });

  it('guesses a biased coin as its Markov chain says', () => {
    // published: Efron 1971 (Biometrika 58:403–417): with two sequences and one margin,
    // minimisation is his coin. The distance of the counts is followed here slot by slot.
    const participants = 60;
    const p = 0.8;
    let distances = [1];
    let right = 0;
    for (let slot = 0; slot < participants; slot += 1) {
      const next = new Array<number>(slot + 2).fill(0);
      for (const [distance, probability] of distances.entries()) {
        right += probability * (distance === 0 ? 0.5 : p);
        next[distance + 1]! += probability * (distance === 0 ? 1 : 1 - p);
        if (distance > 0) next[distance - 1]! += probability * p;
      }
      distances = next;
    }
    const { study } = estimated(TWO, minimising(p), { participantsPerSite: participants });
    expectWithin(study, right / participants);
  });
});

describe('somebody who sees one station of two', () => {
  it('is right about the second of a pair after seeing the first, and by chance otherwise', () => {
    // By hand: n arrivals at each station in random order. The slot is the second of its pair half
    // of the time, and the one before was then at the same station with (n − 1)/(2n − 1).
    const n = 12;
    const { station, site } = estimated(TWO, BALANCED, { stationsPerSite: 2, studies: 400 });
    expectWithin(station, 0.5 + (0.25 * (n - 1)) / (2 * n - 1));
    expect(site.estimate).toBeCloseTo(0.75, 12);
  });

  it('is right less often than somebody who sees the site, and that one than the study', () => {
    const changes = { sites: 3, stationsPerSite: 2, studies: 60, strata: ['a', 'b'] };
    for (const policy of [BALANCED, minimising(0.9)]) {
      const { station, site, study, chance } = estimated(FOUR, policy, changes);
      expect(station.estimate).toBeGreaterThan(chance);
      expect(site.estimate).toBeGreaterThan(station.estimate);
      expect(study.estimate).toBeGreaterThan(site.estimate);
    }
  });

  it('learns nothing about a site from the others under permuted blocks', () => {
    const policy: PolicyChoice = { kind: 'permuted-blocks', multiples: [1, 2] };
    const alone = estimated(TWO, policy, { studies: 300 });
    const among = estimated(TWO, policy, { studies: 300, sites: 3, seed: '00000000000000b6' });
    const { estimate, standardError } = among.site;
    const distance = Math.hypot(standardError, alone.site.standardError);
    expect(Math.abs(estimate - alone.site.estimate)).toBeLessThan(4.9 * distance);
  });
});

describe('foresight', () => {
  it.each<PolicyChoice>([
    BALANCED,
    { kind: 'permuted-blocks', multiples: [1, 2, 3] },
    minimising(0.7),
    { ...minimising(0.85), imbalance: 'range' } as PolicyChoice,
  ])('gives what the policy $kind hands out its true probability', (policy) => {
    const foreseen = [0, 0, 0, 0];
    const drawn = [0, 0, 0, 0];
    let variance = 0;
    for (let byte = 0; byte < 40; byte += 1) {
      const { arrive } = openStudy(FOUR, secretOf(byte), policy);
      const foresight = foresightOf({ set: FOUR, policy, factorKeys: ['stratum'] });
      for (let index = 0; index < 50; index += 1) {
        const arrival = { site: (index * index) % 3, stratum: index % 2 };
        const place = { siteId: `site-${arrival.site}`, stratum: `stratum-${arrival.stratum}` };
        const chances = foresight.probabilities(place);
        expect(chances.reduce((a, b) => a + b, 0)).toBeCloseTo(1, 12);
        const { sequenceIndex } = arrive(arrival);
        expect(chances[sequenceIndex]).toBeGreaterThan(0);
        // Ranked by their probability, so that sequences do not stand for one another.
        const ranked = chances.map((_, at) => at).sort((a, b) => chances[b]! - chances[a]!);
        for (const [rank, at] of ranked.entries()) foreseen[rank]! += chances[at]!;
        drawn[ranked.indexOf(sequenceIndex)]! += 1;
        variance += 0.25;
        foresight.record(place, sequenceIndex);
      }
    }
    // A martingale with steps of variance at most 1/4: 4.9 standard deviations.
    for (const [rank, count] of drawn.entries()) {
      expect(Math.abs(count - foreseen[rank]!)).toBeLessThan(4.9 * Math.sqrt(variance));
    }
  });
});

describe('the estimate', () => {
  it('is the same for the same seed, and another for another', () => {
    const changes = { sites: 2, studies: 20, stationsPerSite: 2 };
    const policy = minimising(0.8);
    expect(estimated(FOUR, policy, changes)).toEqual(estimated(FOUR, policy, changes));
    const other = estimated(FOUR, policy, { ...changes, seed: '00000000000000ff' });
    expect(other).not.toEqual(estimated(FOUR, policy, changes));
  });

  it.each([
    [{ studies: 1 }, /studies must be a whole number from 2, not 1/],
    [{ sites: 0 }, /sites must be a whole number from 1/],
    [{ imagined: 1.5 }, /imagined/],
    [{ stationsPerSite: 25 }, /as many participants as stations/],
    [{ strata: [] }, /no stratum/],
    [{ seed: 'x' }, /seed/],
  ] as const)('refuses %o', (changes, message) => {
    expect(() => estimated(FOUR, BALANCED, changes)).toThrow(message);
  });
});
