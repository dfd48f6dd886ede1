import { keyedChance } from '#core/allocation/keyed-draw.ts';
import { type AllocationLedger, emptyLedger, issueNext } from '#core/allocation/ledger.ts';
import type { SlotRecord } from '#core/allocation/replay.ts';
import type { SequenceSet } from '#core/allocation/tally.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import type { BaseScheme, PolicyChoice } from '#core/protocol/protocol.ts';

export const STUDY_ID = '0197f000-0000-7000-8000-000000000001';

export interface Arrival {
  readonly site: number;
  readonly stratum: number;
}

export function setOf(kind: BaseScheme, size: number) {
  const keys = Array.from({ length: size }, (_, index) => `condition-${index}`);
  return { sequences: sequencesOf({ kind }, keys, size), conditionCount: size };
}

export function secretOf(byte: number): Uint8Array {
  return new Uint8Array(32).fill(byte);
}

export function rangeOf(counts: ArrayLike<number>): number {
  const list = Array.from(counts);
  return Math.max(...list) - Math.min(...list);
}

/** A study that hands out slots one arrival at a time and keeps their records. */
export function openStudy(
  set: SequenceSet,
  secret: Uint8Array,
  policy: PolicyChoice = { kind: 'balanced' },
) {
  const chance = keyedChance({ secret, studyId: STUDY_ID, protocolVersion: 1 });
  const ledger: AllocationLedger = emptyLedger({ set, policy, factorKeys: ['stratum'] }, chance);
  const slots: SlotRecord[] = [];
  const slotsBySite = new Map<string, number>();
  const arrive = (arrival: Arrival): SlotRecord => {
    const siteId = `site-${arrival.site}`;
    const stratum = `stratum-${arrival.stratum}`;
    const slotNumber = (slotsBySite.get(siteId) ?? 0) + 1;
    slotsBySite.set(siteId, slotNumber);
    const next = issueNext(ledger, { siteId, stratum, slotNumber });
    const slot: SlotRecord = {
      issueNumber: slots.length + 1,
      siteId,
      slotNumber,
      protocolVersion: 1,
      stratum,
      ...next,
    };
    slots.push(slot);
    return slot;
  };
  return { ledger, slots, arrive };
}

/** Counts by sequence of the slots that a condition picks: the plain slow way. */
export function countSlots(
  slots: readonly SlotRecord[],
  sequenceCount: number,
  where: (slot: SlotRecord) => boolean,
): number[] {
  const counts = new Array<number>(sequenceCount).fill(0);
  for (const slot of slots.filter(where)) {
    counts[slot.sequenceIndex] = (counts[slot.sequenceIndex] ?? 0) + 1;
  }
  return counts;
}
