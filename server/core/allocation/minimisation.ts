import { DomainError } from '../errors.ts';
import type { Minimisation } from '../protocol/protocol.ts';
import { type Draw, uniformBelow } from './keyed-draw.ts';

/** Issued slots by sequence among those who share one thing with the arrival, and its weight. */
export interface WeightedMargin {
  readonly counts: ArrayLike<number>;
  /** Whole number from 0; with whole weights equal imbalances compare as equal. */
  readonly weight: number;
}

/** Values of one four-byte draw. */
const WORDS = 2 ** 32;

/**
 * How much imbalance each sequence would leave, if the next slot carried it: smaller is better.
 *
 * Pocock and Simon put the slot on each sequence in turn, measure how unequal the counts of every
 * margin of the arrival then are, and add these up by weight.
 * - `range`: the measure is the largest count less the smallest. What is returned is their sum.
 * - `variance`: the measure is the variance of the counts over the sequences. One slot more of
 *   sequence k raises a margin's sum of squares by 2·x_k + 1, with x_k its count, and leaves
 *   everything else that the variance is made of the same for all k. Sequences therefore rank as
 *   the weighted sums of their counts, which are returned: exact whole numbers.
 *
 * Source: Pocock & Simon 1975, Biometrics 31:103–115, who propose range and variance among other
 * measures.
 *
 * @returns by sequence index; O(sequences · margins)
 * @throws {DomainError} when a margin has not as many counts as there are sequences
 */
export function imbalances(
  margins: readonly WeightedMargin[],
  measure: Minimisation['imbalance'],
  sequenceCount: number,
): number[] {
  const sums = new Array<number>(sequenceCount).fill(0);
  for (const { counts, weight } of margins) {
    if (counts.length !== sequenceCount) {
      throw new DomainError(`${counts.length} counts for ${sequenceCount} sequences`);
    }
    const measured = measure === 'range' ? rangesAfter(counts) : counts;
    for (let index = 0; index < sequenceCount; index += 1) {
      sums[index] = (sums[index] ?? 0) + weight * (measured[index] ?? 0);
    }
  }
  return sums;
}

/** Largest less smallest count, after one slot more of each sequence in turn. */
function rangesAfter(counts: ArrayLike<number>): number[] {
  const list = Array.from(counts);
  const [least = 0, second = Number.POSITIVE_INFINITY] = list.toSorted((a, b) => a - b);
  const most = Math.max(...list);
  return list.map((count) => {
    const smallest = count === least ? Math.min(count + 1, second) : least;
    return Math.max(most, count + 1) - smallest;
  });
}

/** The sequences that leave the least imbalance, in their order; at least one. */
export function leastImbalanced(imbalance: readonly number[]): number[] {
  const least = Math.min(...imbalance);
  return Array.from(imbalance.keys()).filter((index) => imbalance[index] === least);
}

/**
 * The policy *minimisation*: which sequence the next slot carries. The best sequence is the one
 * that leaves the least imbalance, a tie being broken by lot. It is taken with `bestProbability`;
 * otherwise one of the others is, each equally likely.
 *
 * What holds:
 * - While the probability p is below 1, no slot is certain, whoever knows whatever: each of the n
 *   sequences has probability at least (1 − p)/(n − 1).
 * - With p = 1 and one weight above 0, the counts of every such margin (each site, or each level of
 *   the factor, or the study) never differ by more than 1: the least-issued sequence is taken.
 *
 * What does not hold: with p < 1 no bound on any difference of counts is certain, since every order
 * of sequences can come; and whatever p is, nothing is said about cells. Balance is sought in the
 * site, each factor and the study apart, so that all of these can be even while one site × stratum
 * is not. That is the price for keeping many factors even where most cells hold hardly anybody.
 * With p = 1 a slot is certain to whoever knows the margins, unless there is a tie.
 *
 * Source: Pocock & Simon 1975, Biometrics 31:103–115; their choice of probabilities is p for the
 * first-ranked and (1 − p)/(n − 1) for each other.
 *
 * @param input.margins of the arrival: its site, its level of each factor, the study
 * @param input.draw    the slot's generator, see `slotDraw`
 * @returns the sequence index, and how many draws were used
 * @throws {DomainError} when there are no sequences, and as `imbalances`
 */
export function minimisedSequence(input: {
  readonly sequenceCount: number;
  readonly margins: readonly WeightedMargin[];
  readonly policy: Pick<Minimisation, 'imbalance' | 'bestProbability'>;
  readonly draw: Draw;
}): { sequenceIndex: number; drawsUsed: number } {
  const { sequenceCount, margins, policy, draw } = input;
  if (sequenceCount === 0) throw new DomainError('There are no sequences to hand out');
  let drawsUsed = 0;
  const below = (range: number): number => {
    const before = drawsUsed;
    const drawn = uniformBelow(range, (drawNumber) => draw(before + drawNumber));
    drawsUsed += drawn.drawsUsed;
    return drawn.value;
  };
  const candidates = leastImbalanced(imbalances(margins, policy.imbalance, sequenceCount));
  const best = candidates[below(candidates.length)] ?? 0;
  const { bestProbability } = policy;
  if (sequenceCount === 1 || bestProbability === 1 || below(WORDS) < bestProbability * WORDS) {
    return { sequenceIndex: best, drawsUsed };
  }
  const other = below(sequenceCount - 1);
  return { sequenceIndex: other < best ? other : other + 1, drawsUsed };
}
