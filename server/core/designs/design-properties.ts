import { DomainError } from '../errors.ts';

/** What a set of sequences promises, each sequence counted once. */
export interface DesignProperties {
  readonly periods: number;
  /** A block is one whole set of sequences: this many participants. */
  readonly participantsPerBlock: number;
  /** Entry [condition][period index]: how many sequences present the condition in that period. */
  readonly conditionByPeriod: number[][];
  /** Entry [first][second]: how often `second` comes immediately after `first`. */
  readonly orderedPairs: number[][];
  /** Every condition stands equally often in every period. */
  readonly uniformOnPeriods: boolean;
  /** Every sequence presents every condition equally often. */
  readonly uniformWithinSequences: boolean;
  /** Every ordered pair of two different conditions equally often, and none follows itself. */
  readonly carryoverBalanced: boolean;
  /** Every ordered pair equally often, a condition after itself included. */
  readonly stronglyCarryoverBalanced: boolean;
  /** Pairs at every distance, from 1 to p − 1 periods. */
  readonly lags: readonly LagBalance[];
}

/** How evenly conditions follow each other at one distance. */
export interface LagBalance {
  /** Periods from the first to the second of the pair; 1 is immediate succession. */
  readonly lag: number;
  /** Entry [first][second]: how often `second` comes `lag` periods after `first`. */
  readonly orderedPairs: number[][];
  /** Every ordered pair of two different conditions equally often, and none with itself. */
  readonly balanced: boolean;
  /** Every ordered pair equally often, a condition with itself included. */
  readonly stronglyBalanced: boolean;
}

/**
 * Counts and balance of a set of sequences.
 * Source of the terms: Jones & Kenward, Design and Analysis of Cross-Over Trials, chapter 4
 * (uniform on periods, uniform within sequences, balanced and strongly balanced for carryover).
 * A single period has no pairs: it counts as balanced, and `lags` is empty.
 *
 * @param sequences      rows of equal length p ≥ 1 of condition indices 0..conditionCount−1
 * @param conditionCount number of conditions, including any that no sequence presents
 * @throws {DomainError} when there is no sequence, lengths differ or an index is out of range
 */
export function designProperties(
  sequences: readonly (readonly number[])[],
  conditionCount: number,
): DesignProperties {
  const periods = sequences[0]?.length ?? 0;
  if (periods === 0) throw new DomainError('A design needs at least one sequence and one period');
  const conditionByPeriod = table(conditionCount, periods);
  const withinSequences = table(sequences.length, conditionCount);
  for (const [row, sequence] of sequences.entries()) {
    if (sequence.length !== periods) throw new DomainError('Sequences differ in length');
    for (const [periodIndex, condition] of sequence.entries()) {
      if (!Number.isInteger(condition) || condition < 0 || condition >= conditionCount) {
        throw new DomainError(`Sequence ${row + 1} names condition index ${condition}`);
      }
      increment(conditionByPeriod, condition, periodIndex);
      increment(withinSequences, row, condition);
    }
  }
  const lags = Array.from({ length: periods - 1 }, (_, index) =>
    lagBalance(sequences, conditionCount, index + 1),
  );
  const immediate = lags[0] ?? lagBalance(sequences, conditionCount, 1);
  return {
    periods,
    participantsPerBlock: sequences.length,
    conditionByPeriod,
    orderedPairs: immediate.orderedPairs,
    uniformOnPeriods: allEqual(conditionByPeriod.flat()),
    uniformWithinSequences: withinSequences.every(allEqual),
    carryoverBalanced: immediate.balanced,
    stronglyCarryoverBalanced: immediate.stronglyBalanced,
    lags,
  };
}

function lagBalance(
  sequences: readonly (readonly number[])[],
  conditionCount: number,
  lag: number,
): LagBalance {
  const orderedPairs = table(conditionCount, conditionCount);
  for (const sequence of sequences) {
    for (const [periodIndex, second] of sequence.entries()) {
      const first = sequence[periodIndex - lag];
      if (first !== undefined) increment(orderedPairs, first, second);
    }
  }
  const different = orderedPairs.flatMap((row, first) => row.filter((_, i) => i !== first));
  const same = orderedPairs.map((row, first) => row[first] ?? 0);
  return {
    lag,
    orderedPairs,
    balanced: allEqual(different) && same.every((count) => count === 0),
    stronglyBalanced: allEqual(orderedPairs.flat()),
  };
}

/**
 * How many participants make whole blocks, for an enrolment of at least the target.
 *
 * @param participantsPerBlock ≥ 1
 * @param targetEnrolment      ≥ 0
 * @returns the number of blocks, the next multiple of the block size, and how many that is above
 *   the target
 * @throws {DomainError} when an argument is not such a whole number
 */
export function wholeBlocks(
  participantsPerBlock: number,
  targetEnrolment: number,
): { blocks: number; participants: number; aboveTarget: number } {
  if (!Number.isSafeInteger(participantsPerBlock) || participantsPerBlock < 1) {
    throw new DomainError(`A block holds at least one participant: ${participantsPerBlock}`);
  }
  if (!Number.isSafeInteger(targetEnrolment) || targetEnrolment < 0) {
    throw new DomainError(`A target enrolment is a whole number from 0: ${targetEnrolment}`);
  }
  const blocks = Math.ceil(targetEnrolment / participantsPerBlock);
  const participants = blocks * participantsPerBlock;
  return { blocks, participants, aboveTarget: participants - targetEnrolment };
}

function table(rows: number, columns: number): number[][] {
  return Array.from({ length: rows }, () => new Array<number>(columns).fill(0));
}

function increment(counts: number[][], row: number, column: number): void {
  const line = counts[row];
  if (line !== undefined) line[column] = (line[column] ?? 0) + 1;
}

function allEqual(counts: readonly number[]): boolean {
  return counts.every((count) => count === counts[0]);
}
