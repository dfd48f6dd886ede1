import { DomainError } from '../errors.ts';
import type { Draw } from './keyed-draw.ts';
import { nextSequence } from './next-sequence.ts';
import { addToTally, emptyTally, type SequenceSet, type Tally } from './tally.ts';

/**
 * Counts of one protocol version's issued slots, kept up to date slot by slot, so that a batch of
 * arrivals is allocated without reading all counts again. Made by `emptyLedger`, changed only by
 * `recordIssued` and `issueNext`.
 */
export interface AllocationLedger {
  readonly set: SequenceSet;
  /** By site, then by stratum. */
  readonly cells: Map<string, Map<string, Int32Array>>;
  readonly sites: Map<string, Tally>;
  readonly strata: Map<string, Tally>;
  readonly study: Tally;
}

/**
 * A ledger with nothing issued.
 *
 * @throws {DomainError} when there are no sequences, they differ in length, or one holds something
 *   else than condition indices below conditionCount
 */
export function emptyLedger(set: SequenceSet): AllocationLedger {
  const periods = set.sequences[0]?.length ?? 0;
  if (periods === 0) throw new DomainError('There are no sequences to hand out');
  for (const sequence of set.sequences) {
    if (sequence.length !== periods) throw new DomainError('Sequences differ in length');
    for (const condition of sequence) {
      if (!Number.isInteger(condition) || condition < 0 || condition >= set.conditionCount) {
        throw new DomainError(`A sequence names condition index ${condition}`);
      }
    }
  }
  return {
    set,
    cells: new Map(),
    sites: new Map(),
    strata: new Map(),
    study: emptyTally(set),
  };
}

/**
 * Counts slots that were issued in the past, for example from stored counts by cell.
 *
 * @param issued.count how many slots of this sequence in this cell, 0 or more
 * @throws {DomainError} when there is no such sequence or the count is not such a number
 */
export function recordIssued(
  ledger: AllocationLedger,
  issued: {
    readonly siteId: string;
    readonly stratum: string;
    readonly sequenceIndex: number;
    readonly count: number;
  },
): void {
  const { set } = ledger;
  const { siteId, stratum, sequenceIndex, count } = issued;
  addToTally(ledger.study, set, sequenceIndex, count);
  addToTally(tallyIn(ledger.sites, siteId, set), set, sequenceIndex, count);
  addToTally(tallyIn(ledger.strata, stratum, set), set, sequenceIndex, count);
  const cell = cellIn(ledger, siteId, stratum);
  cell[sequenceIndex] = (cell[sequenceIndex] ?? 0) + count;
}

/**
 * Picks the sequence of the next slot by the policy *balanced* and counts it in the ledger.
 *
 * @param arrival.draw the slot's generator, see `slotDraw`
 * @returns as `nextSequence`
 */
export function issueNext(
  ledger: AllocationLedger,
  arrival: { readonly siteId: string; readonly stratum: string; readonly draw: Draw },
): { sequenceIndex: number; drawsUsed: number } {
  const { set } = ledger;
  const { siteId, stratum, draw } = arrival;
  const issued = {
    cell: cellIn(ledger, siteId, stratum),
    site: tallyIn(ledger.sites, siteId, set),
    stratum: tallyIn(ledger.strata, stratum, set),
    study: ledger.study,
  };
  const next = nextSequence({ set, issued, draw });
  recordIssued(ledger, { siteId, stratum, sequenceIndex: next.sequenceIndex, count: 1 });
  return next;
}

function tallyIn(tallies: Map<string, Tally>, key: string, set: SequenceSet): Tally {
  const found = tallies.get(key);
  if (found !== undefined) return found;
  const created = emptyTally(set);
  tallies.set(key, created);
  return created;
}

function cellIn(ledger: AllocationLedger, siteId: string, stratum: string): Int32Array {
  const site = ledger.cells.get(siteId) ?? new Map<string, Int32Array>();
  ledger.cells.set(siteId, site);
  const cell = site.get(stratum) ?? new Int32Array(ledger.set.sequences.length);
  site.set(stratum, cell);
  return cell;
}
