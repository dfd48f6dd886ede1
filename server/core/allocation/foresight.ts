import { AssertionError } from '../errors.ts';
import type { Minimisation } from '../protocol/protocol.ts';
import type { Chance } from './keyed-draw.ts';
import {
  type AllocationPlan,
  copyLedger,
  emptyLedger,
  issuedTallies,
  recordIssued,
  weightedMargins,
} from './ledger.ts';
import { imbalances, leastImbalanced } from './minimisation.ts';
import { balancedCandidates } from './next-sequence.ts';

/** Where somebody arrives. */
export interface Place {
  readonly siteId: string;
  readonly stratum: string;
}

/** What can be said about the next slot by somebody who knows every slot before it, not the key. */
export interface Foresight {
  /** The probability of each sequence for an arrival there, by sequence index; the sum is 1. */
  probabilities(place: Place): number[];
  /** Takes note of an issued slot. */
  record(place: Place, sequenceIndex: number): void;
  /** The same knowledge, which grows apart from the first. */
  copy(): Foresight;
}

/**
 * Foresight with nothing issued yet. Exact for every policy: the draws are unknown, the rule and
 * the counts are known, and of blocks, whose sizes are unknown too, every possible course is kept
 * with its probability.
 *
 * @throws {DomainError} as `emptyLedger`
 */
export function foresightOf(plan: AllocationPlan): Foresight {
  const { policy, set } = plan;
  if (policy.kind === 'permuted-blocks') {
    return blockForesight(policy.multiples, set.sequences.length, new Map());
  }
  return ledgerForesight(emptyLedger(plan, NO_CHANCE));
}

const NO_CHANCE: Chance = { slot: drawsNothing, block: drawsNothing };

function drawsNothing(): never {
  throw new AssertionError('Foresight draws nothing');
}

function ledgerForesight(ledger: ReturnType<typeof emptyLedger>): Foresight {
  const { set, policy } = ledger.plan;
  const size = set.sequences.length;
  return {
    probabilities: (place) => {
      if (policy.kind === 'minimisation') {
        const margins = weightedMargins(ledger, policy, place);
        return lotOf(leastImbalanced(imbalances(margins, policy.imbalance, size)), policy, size);
      }
      const candidates = balancedCandidates({ set, issued: issuedTallies(ledger, place) });
      const chances = new Array<number>(size).fill(0);
      for (const candidate of candidates) chances[candidate] = 1 / candidates.length;
      return chances;
    },
    record: (place, sequenceIndex) => recordIssued(ledger, { ...place, sequenceIndex, count: 1 }),
    copy: () => ledgerForesight(copyLedger(ledger)),
  };
}

/** The lot of `minimisedSequence` as probabilities. */
function lotOf(best: readonly number[], policy: Minimisation, size: number): number[] {
  if (size === 1) return [1];
  const { bestProbability } = policy;
  const other = (1 - bestProbability) / (size - 1);
  // Each of the tied best is first with probability 1/m, and otherwise one of the others.
  const share = bestProbability / best.length + other * (1 - 1 / best.length);
  return Array.from({ length: size }, (_, index) => (best.includes(index) ? share : other));
}

/** One possible course of a cell's blocks, with its probability given the cell so far. */
interface Course {
  /** How often each sequence stands in the blocks before the open one. */
  readonly before: number;
  readonly multiple: number;
  readonly probability: number;
}

interface BlockCell {
  readonly counts: Int32Array;
  courses: readonly Course[];
}

function blockForesight(
  multiples: readonly number[],
  size: number,
  cells: Map<string, BlockCell>,
): Foresight {
  const opened = (before: number, probability: number): Course[] =>
    multiples.map((multiple) => ({
      before,
      multiple,
      probability: probability / multiples.length,
    }));
  const cellAt = ({ siteId, stratum }: Place): BlockCell => {
    const key = JSON.stringify([siteId, stratum]);
    const cell = cells.get(key) ?? { counts: new Int32Array(size), courses: opened(0, 1) };
    cells.set(key, cell);
    return cell;
  };
  return {
    probabilities: (place) => {
      const { counts, courses } = cellAt(place);
      const chances = new Array<number>(size).fill(0);
      for (const course of courses) {
        const share = course.probability / leftIn(course, counts);
        const end = course.before + course.multiple;
        for (const index of chances.keys()) chances[index]! += share * (end - counts[index]!);
      }
      // An imagined cell can be contradicted by what was seen; then it says nothing.
      return courses.length === 0 ? chances.fill(1 / size) : chances;
    },
    record: (place, sequenceIndex) => {
      const cell = cellAt(place);
      const before = cell.counts[sequenceIndex]!;
      const fitting = cell.courses.map((course) => {
        const remaining = course.before + course.multiple - before;
        const share = course.probability / leftIn(course, cell.counts);
        return { ...course, probability: share * remaining };
      });
      cell.counts[sequenceIndex]! += 1;
      const issued = sumOf(cell.counts);
      cell.courses = normalised(
        fitting.flatMap((course) => {
          const end = course.before + course.multiple;
          return issued === end * size ? opened(end, course.probability) : [course];
        }),
      );
    },
    copy: () => {
      const copies = Array.from(cells, ([key, { counts, courses }]): [string, BlockCell] => [
        key,
        { counts: counts.slice(), courses },
      ]);
      return blockForesight(multiples, size, new Map(copies));
    },
  };
}

/** Slots that are left in the open block of one course: at least one. */
function leftIn(course: Course, counts: Int32Array): number {
  return (course.before + course.multiple) * counts.length - sumOf(counts);
}

/** Without those that cannot be; courses with the same open block are one. */
function normalised(courses: readonly Course[]): Course[] {
  const merged = new Map<string, Course>();
  let total = 0;
  for (const course of courses) {
    if (course.probability <= 0) continue;
    const key = `${course.before} ${course.multiple}`;
    const probability = course.probability + (merged.get(key)?.probability ?? 0);
    merged.set(key, { ...course, probability });
    total += course.probability;
  }
  return Array.from(merged.values(), (course) => ({
    ...course,
    probability: course.probability / total,
  }));
}

function sumOf(counts: Int32Array): number {
  return counts.reduce((sum, count) => sum + count, 0);
}
