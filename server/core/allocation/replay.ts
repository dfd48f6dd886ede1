import { keyedChance, SECRET_BYTES, secretHashOf } from './keyed-draw.ts';
import { type AllocationLedger, type AllocationPlan, emptyLedger, issueNext } from './ledger.ts';

/** One issued slot, as it was recorded. */
export interface SlotRecord {
  /** 1, 2, … over the whole study, in the order of issue: the margins depend on that order. */
  readonly issueNumber: number;
  readonly siteId: string;
  /** 1, 2, … at its site. */
  readonly slotNumber: number;
  readonly protocolVersion: number;
  readonly stratum: string;
  readonly sequenceIndex: number;
  readonly drawsUsed: number;
}

/** The first place where the record and its recomputation differ. */
export interface ReplayDifference {
  readonly kind:
    | 'secret'
    | 'issue-number'
    | 'slot-number'
    | 'protocol-version'
    | 'sequence'
    | 'draws'
    | 'slot-count';
  /** The issue number where it was found; null for the secret and for the number of slots. */
  readonly issueNumber: number | null;
  readonly expected: string | number;
  readonly recorded: string | number;
}

/**
 * Recomputes every allocation of a study from its revealed secret.
 *
 * The secret must have the published hash; issue numbers must run from 1 without gap, slot numbers
 * likewise at each site; every sequence and number of draws must be what the policy of its protocol
 * version gives after the slots before; and there must be as many slots as the study says it
 * issued, since slots cut off at the end leave no gap.
 *
 * What it cannot see: two slots of different sites that change places in the order of issue, when
 * that order made no difference to either or to what followed. The audit log holds the order.
 *
 * @param input.plans       sequences and policy of each protocol version by version number
 * @param input.slots       in any order; they are replayed by issue number
 * @param input.slotsIssued how many the study says it issued
 * @returns the number of slots that agree before the first difference, and that difference
 * @throws {DomainError} when a protocol version's sequences are not well-formed
 */
export function replayAllocations(input: {
  readonly studyId: string;
  readonly secret: Uint8Array;
  readonly secretHash: string;
  readonly plans: ReadonlyMap<number, AllocationPlan>;
  readonly slots: readonly SlotRecord[];
  readonly slotsIssued: number;
}): { verified: number; firstDifference: ReplayDifference | null } {
  const { studyId, secret, secretHash, slotsIssued } = input;
  const actualHash = secretHashOf(secret);
  if (secret.length !== SECRET_BYTES || actualHash !== secretHash) {
    const firstDifference: ReplayDifference = {
      kind: 'secret',
      issueNumber: null,
      expected: secretHash,
      recorded: actualHash,
    };
    return { verified: 0, firstDifference };
  }
  const slots = input.slots.toSorted((a, b) => a.issueNumber - b.issueNumber);
  const ledgers = new Map(
    Array.from(input.plans, ([protocolVersion, plan]): [number, AllocationLedger] => [
      protocolVersion,
      emptyLedger(plan, keyedChance({ secret, studyId, protocolVersion })),
    ]),
  );
  const slotsBySite = new Map<string, number>();
  for (const [verified, slot] of slots.entries()) {
    const slotNumber = (slotsBySite.get(slot.siteId) ?? 0) + 1;
    slotsBySite.set(slot.siteId, slotNumber);
    const expected = { issueNumber: verified + 1, slotNumber };
    const firstDifference = differenceOf(slot, expected, ledgers);
    if (firstDifference !== null) return { verified, firstDifference };
  }
  if (slots.length !== slotsIssued) {
    const firstDifference: ReplayDifference = {
      kind: 'slot-count',
      issueNumber: null,
      expected: slotsIssued,
      recorded: slots.length,
    };
    return { verified: slots.length, firstDifference };
  }
  return { verified: slots.length, firstDifference: null };
}

/** Compares one slot with its recomputation, which is counted in the version's ledger. */
function differenceOf(
  slot: SlotRecord,
  expected: { readonly issueNumber: number; readonly slotNumber: number },
  ledgers: ReadonlyMap<number, AllocationLedger>,
): ReplayDifference | null {
  const { issueNumber } = expected;
  const differ = (
    kind: ReplayDifference['kind'],
    wanted: string | number,
    recorded: string | number,
  ): ReplayDifference => ({ kind, issueNumber, expected: wanted, recorded });
  if (slot.issueNumber !== issueNumber) {
    return differ('issue-number', issueNumber, slot.issueNumber);
  }
  if (slot.slotNumber !== expected.slotNumber) {
    return differ('slot-number', expected.slotNumber, slot.slotNumber);
  }
  const ledger = ledgers.get(slot.protocolVersion);
  if (ledger === undefined) {
    return differ('protocol-version', [...ledgers.keys()].join(', '), slot.protocolVersion);
  }
  const next = issueNext(ledger, slot);
  if (next.sequenceIndex !== slot.sequenceIndex) {
    return differ('sequence', next.sequenceIndex, slot.sequenceIndex);
  }
  if (next.drawsUsed !== slot.drawsUsed) {
    return differ('draws', next.drawsUsed, slot.drawsUsed);
  }
  return null;
}
