import { DomainError } from '../errors.ts';

/** The sequences of one protocol version, as the allocation rule needs them. */
export interface SequenceSet {
  /** Rows of equal length p of condition indices from 0. */
  readonly sequences: readonly (readonly number[])[];
  readonly conditionCount: number;
}

/**
 * Slots issued within one margin (a site, a stratum or the study), three ways. All arrays are
 * changed in place by `addToTally`, and by nothing else.
 */
export interface Tally {
  /** By sequence index. */
  readonly counts: Int32Array;
  /** Condition by period: entry condition · p + period index, length conditionCount · p. */
  readonly byPeriod: Int32Array;
  /** Ordered pairs: entry first · conditionCount + second, length conditionCount². */
  readonly byPair: Int32Array;
}

/** A tally of nothing issued yet. */
export function emptyTally(set: SequenceSet): Tally {
  const periods = set.sequences[0]?.length ?? 0;
  return {
    counts: new Int32Array(set.sequences.length),
    byPeriod: new Int32Array(set.conditionCount * periods),
    byPair: new Int32Array(set.conditionCount ** 2),
  };
}

/** A tally with the same counts, which changes apart from the first. */
export function copyTally({ counts, byPeriod, byPair }: Tally): Tally {
  return { counts: counts.slice(), byPeriod: byPeriod.slice(), byPair: byPair.slice() };
}

/**
 * The tally of given counts by sequence.
 *
 * @param counts issued slots by sequence index, length as the set's sequences
 * @throws {DomainError} when the length differs or a count is not a whole number from 0
 */
export function tallyOf(set: SequenceSet, counts: ArrayLike<number>): Tally {
  if (counts.length !== set.sequences.length) {
    throw new DomainError(`${counts.length} counts for ${set.sequences.length} sequences`);
  }
  const tally = emptyTally(set);
  for (let index = 0; index < counts.length; index += 1) {
    const count = counts[index] ?? 0;
    if (count !== 0) addToTally(tally, set, index, count);
  }
  return tally;
}

/**
 * Counts `count` further issued slots of one sequence, in O(periods).
 *
 * @throws {DomainError} when there is no such sequence or count is not a whole number from 0
 */
export function addToTally(
  tally: Tally,
  set: SequenceSet,
  sequenceIndex: number,
  count: number,
): void {
  const sequence = set.sequences[sequenceIndex];
  if (sequence === undefined) throw new DomainError(`There is no sequence ${sequenceIndex}`);
  if (!Number.isSafeInteger(count) || count < 0) {
    throw new DomainError(`Issued slots are counted in whole numbers from 0, not ${count}`);
  }
  add(tally.counts, sequenceIndex, count);
  forEachEntry(set, sequence, (periodEntry, pairEntry) => {
    add(tally.byPeriod, periodEntry, count);
    if (pairEntry !== null) add(tally.byPair, pairEntry, count);
  });
}

/**
 * How crowded the places are that one more slot of the sequence would fill: the sum of its
 * condition-by-period counts and of its ordered-pair counts. Adding 1 to a count x raises x² by
 * 2x + 1, so the sequence with the smallest sum raises the sum of squared counts least, and with
 * it their unevenness.
 */
export function crowding(tally: Tally, set: SequenceSet, sequenceIndex: number): number {
  const sequence = set.sequences[sequenceIndex] ?? [];
  let sum = 0;
  forEachEntry(set, sequence, (periodEntry, pairEntry) => {
    sum += tally.byPeriod[periodEntry] ?? 0;
    if (pairEntry !== null) sum += tally.byPair[pairEntry] ?? 0;
  });
  return sum;
}

function forEachEntry(
  set: SequenceSet,
  sequence: readonly number[],
  visit: (periodEntry: number, pairEntry: number | null) => void,
): void {
  const periods = sequence.length;
  let previous: number | null = null;
  for (let periodIndex = 0; periodIndex < periods; periodIndex += 1) {
    const condition = sequence[periodIndex] ?? 0;
    const pairEntry = previous === null ? null : previous * set.conditionCount + condition;
    visit(condition * periods + periodIndex, pairEntry);
    previous = condition;
  }
}

function add(counts: Int32Array, entry: number, count: number): void {
  counts[entry] = (counts[entry] ?? 0) + count;
}
