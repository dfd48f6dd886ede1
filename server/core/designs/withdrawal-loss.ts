import { DomainError } from '../errors.ts';
import { type Estimable, notEstimable } from '../estimability.ts';
import { GENERATOR, randomStream } from '../numerics/generator.ts';
import { type DesignEfficiency, efficiencyOf } from './efficiency.ts';
import {
  addSequenceInto,
  emptyInformationSums,
  type InformationSums,
  informationOf,
} from './information.ts';

export interface WithdrawalOptions {
  /** How often the whole set of sequences is handed out: participants are this times its rows. */
  readonly blocks: number;
  /** How many participants withdraw, at most; every number from 1 to this is looked at. */
  readonly withdrawalsMax: number;
  /** More different cases than this are sampled instead of enumerated. */
  readonly casesMax: number;
  /** Seed of the samples, 16 lower-case hexadecimal digits. */
  readonly seed: string;
}

/** What some withdrawals after one period cost. */
export interface WithdrawalLoss {
  /** How many participants withdraw. */
  readonly withdrawals: number;
  /** The last period that they complete, from 1. */
  readonly afterPeriod: number;
  readonly basis:
    | { readonly kind: 'enumerated'; readonly cases: number }
    | { readonly kind: 'simulated'; readonly cases: number; readonly generator: typeof GENERATOR };
  readonly direct: EffectLoss;
  readonly directAdjusted: EffectLoss;
  readonly carryover: EffectLoss;
}

export interface EffectLoss {
  /** Mean over the cases in which every comparison can be estimated, by their probability. */
  readonly expected: Estimable<{ readonly value: number }>;
  /** The least over the cases looked at; not estimable when some comparison is not in one. */
  readonly worst: Estimable<{ readonly value: number }>;
  /** Probability that some comparison cannot be estimated. */
  readonly notEstimableShare: number;
}

const EFFECTS = ['direct', 'directAdjusted', 'carryover'] as const;

/**
 * Efficiency left when participants withdraw, each set of participants being equally likely, for
 * every number of withdrawals and every period after which they may happen.
 *
 * The efficiency of a case is the average variance of the pairwise comparisons in the ideal layout
 * with the replication of the complete design (see `designEfficiency`) over the average variance
 * that is left: it falls with the observations that are lost as well as with the balance.
 *
 * Participants with the same sequence are alike, so cases are counted by how many withdraw from
 * each sequence, with hypergeometric probability. When there are more than `casesMax` of them, that
 * many sets of participants are drawn instead; the worst is then the worst of those drawn.
 * Source of the question: Low, Lewis & Prescott 1999, Statistics and Computing 9:219–227.
 *
 * @param sequences      rows of equal length p ≥ 2 of condition indices
 * @param conditionCount t ≥ 2
 * @returns by number of withdrawals, then by period 1..p−1
 * @throws {DomainError} when an option is not a whole number of at least 1, more would withdraw
 *   than there are participants, sequences differ in length or have one period, or the seed is
 *   malformed
 */
export function withdrawalLoss(
  sequences: readonly (readonly number[])[],
  conditionCount: number,
  options: WithdrawalOptions,
): WithdrawalLoss[] {
  const periods = sequences[0]?.length ?? 0;
  checkInput(sequences, periods, options);
  const kinds = kindsOf(sequences, options.blocks);
  const complete = emptyInformationSums(conditionCount, periods);
  for (const { sequence, count } of kinds) addSequenceInto(complete, sequence, count);
  const results: WithdrawalLoss[] = [];
  for (let withdrawals = 1; withdrawals <= options.withdrawalsMax; withdrawals += 1) {
    const counts = kinds.map(({ count }) => count);
    const enumerated = enumerate(counts, withdrawals, options.casesMax);
    const cases = enumerated ?? draw(counts, withdrawals, options);
    for (let afterPeriod = 1; afterPeriod < periods; afterPeriod += 1) {
      const outcomes = cases.map(({ leaving, probability }) => ({
        probability,
        efficiency: efficiencyAfter(complete, kinds, leaving, afterPeriod),
      }));
      results.push({
        withdrawals,
        afterPeriod,
        basis:
          enumerated === null
            ? { kind: 'simulated', cases: cases.length, generator: GENERATOR }
            : { kind: 'enumerated', cases: cases.length },
        ...lossesOf(outcomes),
      });
    }
  }
  return results;
}

/** Participants who receive the same sequence. */
interface Kind {
  readonly sequence: readonly number[];
  readonly count: number;
}

/** How many of each kind withdraw, and how likely that is. */
interface WithdrawalCase {
  readonly leaving: readonly number[];
  readonly probability: number;
}

function checkInput(
  sequences: readonly (readonly number[])[],
  periods: number,
  { blocks, withdrawalsMax, casesMax }: WithdrawalOptions,
): void {
  for (const [name, value] of Object.entries({ blocks, withdrawalsMax, casesMax })) {
    if (!Number.isSafeInteger(value) || value < 1) {
      throw new DomainError(`${name} is a whole number of at least 1, not ${value}`);
    }
  }
  if (periods < 2) throw new DomainError('Withdrawal between periods needs two periods');
  if (sequences.some(({ length }) => length !== periods)) {
    throw new DomainError('Sequences differ in length');
  }
  const participants = blocks * sequences.length;
  if (withdrawalsMax > participants) {
    throw new DomainError(`${withdrawalsMax} of ${participants} participants cannot withdraw`);
  }
}

function kindsOf(sequences: readonly (readonly number[])[], blocks: number): Kind[] {
  const kinds = new Map<string, Kind>();
  for (const sequence of sequences) {
    const key = sequence.join(' ');
    kinds.set(key, { sequence, count: (kinds.get(key)?.count ?? 0) + blocks });
  }
  return [...kinds.values()];
}

/** Every case with its hypergeometric probability, or null when there are more than `casesMax`. */
function enumerate(
  counts: readonly number[],
  withdrawals: number,
  casesMax: number,
): WithdrawalCase[] | null {
  // One case a kind at least: no need to begin.
  if (counts.length > casesMax) return null;
  const cases: WithdrawalCase[] = [];
  const leaving: number[] = [];
  // Participants of a kind and all after it, so that no branch is a dead end.
  const remaining: number[] = [];
  counts.reduceRight((sum, count, kind) => {
    remaining[kind] = sum + count;
    return sum + count;
  }, 0);
  const extend = (left: number, probability: number): void => {
    if (cases.length > casesMax) return;
    const kind = leaving.length;
    if (kind === counts.length) {
      cases.push({ leaving: [...leaving], probability });
      return;
    }
    const count = counts[kind]!;
    const others = remaining[kind]! - count;
    for (let here = Math.max(0, left - others); here <= Math.min(count, left); here += 1) {
      leaving.push(here);
      extend(left - here, probability * hypergeometric(count, others, left, here));
      leaving.pop();
    }
  };
  extend(withdrawals, 1);
  return cases.length > casesMax ? null : cases;
}

/** Probability that, of `drawn` from count + others, just `here` are among the `count`. */
function hypergeometric(count: number, others: number, drawn: number, here: number): number {
  let probability = 1;
  // C(count, here)·C(others, drawn − here)/C(count + others, drawn), factor by factor.
  for (let i = 0; i < drawn; i += 1) {
    const numerator = i < here ? count - i : others - (i - here);
    const sized = i < here ? i + 1 : i - here + 1;
    probability *= (numerator / sized) * ((i + 1) / (count + others - i));
  }
  return probability;
}

function draw(
  counts: readonly number[],
  withdrawals: number,
  { casesMax, seed }: WithdrawalOptions,
): WithdrawalCase[] {
  const stream = randomStream(seed, withdrawals);
  return Array.from({ length: casesMax }, () => {
    const staying = [...counts];
    let participants = staying.reduce((a, b) => a + b, 0);
    for (let taken = 0; taken < withdrawals; taken += 1) {
      let place = stream.nextBelow(participants);
      const kind = staying.findIndex((count) => {
        place -= count;
        return place < 0;
      });
      staying[kind]! -= 1;
      participants -= 1;
    }
    const leaving = staying.map((count, kind) => counts[kind]! - count);
    return { leaving, probability: 1 / casesMax };
  });
}

function efficiencyAfter(
  complete: InformationSums,
  kinds: readonly Kind[],
  leaving: readonly number[],
  afterPeriod: number,
): DesignEfficiency {
  const sums = {
    ...complete,
    effects: Float64Array.from(complete.effects),
    effectsByPeriod: Float64Array.from(complete.effectsByPeriod),
    byPeriod: Float64Array.from(complete.byPeriod),
    replication: Float64Array.from(complete.replication),
  };
  for (const [kind, count] of leaving.entries()) {
    if (count === 0) continue;
    const { sequence } = kinds[kind]!;
    addSequenceInto(sums, sequence, -count);
    addSequenceInto(sums, sequence.slice(0, afterPeriod), count);
  }
  // The ideal stays that of the complete design.
  return efficiencyOf({ ...informationOf(sums), replication: complete.replication });
}

function lossesOf(
  outcomes: readonly { readonly probability: number; readonly efficiency: DesignEfficiency }[],
): Pick<WithdrawalLoss, (typeof EFFECTS)[number]> {
  const lossOf = (effect: (typeof EFFECTS)[number]): EffectLoss => {
    let estimableShare = 0;
    let notEstimableShare = 0;
    let sum = 0;
    let least = Number.POSITIVE_INFINITY;
    for (const { probability, efficiency } of outcomes) {
      const found = efficiency[effect].efficiency;
      if (!found.estimable) {
        notEstimableShare += probability;
        continue;
      }
      estimableShare += probability;
      sum += probability * found.value;
      least = Math.min(least, found.value);
    }
    const never = 'In no case can every comparison be estimated.';
    const somewhere = 'In some case some comparison cannot be estimated.';
    return {
      expected:
        estimableShare === 0
          ? notEstimable('disconnected', never)
          : { estimable: true, value: sum / estimableShare },
      worst:
        notEstimableShare > 0
          ? notEstimable('disconnected', estimableShare === 0 ? never : somewhere)
          : { estimable: true, value: least },
      notEstimableShare,
    };
  };
  return {
    direct: lossOf('direct'),
    directAdjusted: lossOf('directAdjusted'),
    carryover: lossOf('carryover'),
  };
}
