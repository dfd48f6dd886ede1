import { DomainError } from '../errors.ts';
import type { Minimisation, PolicyChoice } from '../protocol/protocol.ts';
import type { Chance } from './keyed-draw.ts';
import { minimisedSequence, type WeightedMargin } from './minimisation.ts';
import { type IssuedTallies, nextSequence } from './next-sequence.ts';
import { type CompleteBlocks, NO_BLOCKS, nextInBlock, openBlock } from './permuted-blocks.ts';
import { addToTally, copyTally, emptyTally, type SequenceSet, type Tally } from './tally.ts';

/** What one protocol version hands out, and by which rule. */
export interface AllocationPlan {
  readonly set: SequenceSet;
  readonly policy: PolicyChoice;
  /** Keys of the between factors; a stratum names a level of each, in this order. */
  readonly factorKeys: readonly string[];
}

/**
 * Counts of one protocol version's issued slots, kept up to date slot by slot, so that a batch of
 * arrivals is allocated without reading all counts again. Made by `emptyLedger`, changed only by
 * `recordIssued` and `issueNext`.
 */
export interface AllocationLedger {
  readonly plan: AllocationPlan;
  readonly chance: Chance;
  /** By site, then by stratum. */
  readonly cells: Map<string, Map<string, Int32Array>>;
  readonly sites: Map<string, Tally>;
  readonly strata: Map<string, Tally>;
  readonly study: Tally;
  /** Under permuted blocks: complete blocks by site and stratum, as far as they were needed. */
  readonly blocks: Map<string, Map<string, CompleteBlocks>>;
}

/**
 * A ledger with nothing issued.
 *
 * @throws {DomainError} when there are no sequences, they differ in length, or one holds something
 *   else than condition indices below conditionCount
 */
export function emptyLedger(plan: AllocationPlan, chance: Chance): AllocationLedger {
  const { set } = plan;
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
    plan,
    chance,
    cells: new Map(),
    sites: new Map(),
    strata: new Map(),
    study: emptyTally(set),
    blocks: new Map(),
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
  const { set } = ledger.plan;
  const { siteId, stratum, sequenceIndex, count } = issued;
  addToTally(ledger.study, set, sequenceIndex, count);
  addToTally(tallyIn(ledger.sites, siteId, set), set, sequenceIndex, count);
  addToTally(tallyIn(ledger.strata, stratum, set), set, sequenceIndex, count);
  const cell = cellIn(ledger, siteId, stratum);
  cell[sequenceIndex] = (cell[sequenceIndex] ?? 0) + count;
}

/** Who the next slot is for. */
export interface NextSlot {
  readonly siteId: string;
  readonly stratum: string;
  /** From 1 at the site. */
  readonly slotNumber: number;
}

/**
 * Picks the sequence of the next slot by the plan's policy and counts it in the ledger.
 *
 * @returns as `nextSequence`, `nextInBlock`, `minimisedSequence`
 */
export function issueNext(
  ledger: AllocationLedger,
  slot: NextSlot,
): { sequenceIndex: number; drawsUsed: number } {
  const next = pickNext(ledger, slot);
  const { siteId, stratum } = slot;
  recordIssued(ledger, { siteId, stratum, sequenceIndex: next.sequenceIndex, count: 1 });
  return next;
}

function pickNext(
  ledger: AllocationLedger,
  slot: NextSlot,
): { sequenceIndex: number; drawsUsed: number } {
  const { plan, chance } = ledger;
  const { siteId, stratum, slotNumber } = slot;
  const { set, policy } = plan;
  const draw = chance.slot(siteId, slotNumber);
  switch (policy.kind) {
    case 'balanced':
      return nextSequence({ set, issued: issuedTallies(ledger, slot), draw });
    case 'permuted-blocks': {
      const cell = cellIn(ledger, siteId, stratum);
      const complete = mapIn(ledger.blocks, siteId);
      const block = openBlock({
        cell,
        multiples: policy.multiples,
        complete: complete.get(stratum) ?? NO_BLOCKS,
        drawOf: (blockNumber) => chance.block(siteId, stratum, blockNumber),
      });
      complete.set(stratum, block.complete);
      return nextInBlock(block, draw);
    }
    case 'minimisation': {
      const margins = weightedMargins(ledger, policy, slot);
      return minimisedSequence({ sequenceCount: set.sequences.length, margins, policy, draw });
    }
  }
}

/** What has been issued as an arrival there sees it. Not copied: it changes with the ledger. */
export function issuedTallies(
  ledger: AllocationLedger,
  { siteId, stratum }: { readonly siteId: string; readonly stratum: string },
): IssuedTallies {
  const { set } = ledger.plan;
  return {
    cell: cellIn(ledger, siteId, stratum),
    site: tallyIn(ledger.sites, siteId, set),
    stratum: tallyIn(ledger.strata, stratum, set),
    study: ledger.study,
  };
}

/** A ledger with the same counts, which changes apart from the first. */
export function copyLedger(ledger: AllocationLedger): AllocationLedger {
  const inner = <Value>(maps: Map<string, Map<string, Value>>, copy: (value: Value) => Value) =>
    copyMap(maps, (map) => copyMap(map, copy));
  return {
    ...ledger,
    cells: inner(ledger.cells, (cell) => cell.slice()),
    sites: copyMap(ledger.sites, copyTally),
    strata: copyMap(ledger.strata, copyTally),
    study: copyTally(ledger.study),
    blocks: inner(ledger.blocks, (complete) => complete),
  };
}

function copyMap<Value>(map: Map<string, Value>, copy: (value: Value) => Value) {
  return new Map(Array.from(map, ([key, value]): [string, Value] => [key, copy(value)]));
}

/** What minimisation keeps even for an arrival: its site, its level of each factor, the study. */
export function weightedMargins(
  ledger: AllocationLedger,
  { weights }: Minimisation,
  arrival: { readonly siteId: string; readonly stratum: string },
): WeightedMargin[] {
  const { set, factorKeys } = ledger.plan;
  const { counts: site } = tallyIn(ledger.sites, arrival.siteId, set);
  const levels = arrival.stratum.split('.');
  return [
    { counts: site, weight: weights.site },
    ...weights.factors.map(({ factor, weight }) => {
      const place = factorKeys.indexOf(factor);
      const counts = new Int32Array(set.sequences.length);
      for (const [stratum, tally] of ledger.strata) {
        if (stratum.split('.')[place] !== levels[place]) continue;
        for (const [index, count] of tally.counts.entries()) counts[index]! += count;
      }
      return { counts, weight };
    }),
    { counts: ledger.study.counts, weight: weights.study },
  ];
}

function mapIn<Value>(maps: Map<string, Map<string, Value>>, key: string): Map<string, Value> {
  const found = maps.get(key) ?? new Map<string, Value>();
  maps.set(key, found);
  return found;
}

function tallyIn(tallies: Map<string, Tally>, key: string, set: SequenceSet): Tally {
  const found = tallies.get(key);
  if (found !== undefined) return found;
  const created = emptyTally(set);
  tallies.set(key, created);
  return created;
}

function cellIn(ledger: AllocationLedger, siteId: string, stratum: string): Int32Array {
  const site = mapIn(ledger.cells, siteId);
  const cell = site.get(stratum) ?? new Int32Array(ledger.plan.set.sequences.length);
  site.set(stratum, cell);
  return cell;
}
