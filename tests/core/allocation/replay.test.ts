import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { secretHashOf } from '#core/allocation/keyed-draw.ts';
import { replayAllocations, type SlotRecord } from '#core/allocation/replay.ts';
import type { PolicyChoice } from '#core/protocol/protocol.ts';
import { openStudy, STUDY_ID, secretOf, setOf } from './arrivals.ts';

const set = setOf('williams', 4);
const secret = secretOf(77);

const POLICIES: readonly PolicyChoice[] = [
  { kind: 'balanced' },
  { kind: 'permuted-blocks', multiples: [1, 2, 3] },
  {
    kind: 'minimisation',
    imbalance: 'variance',
    weights: { site: 3, study: 1, factors: [{ factor: 'stratum', weight: 2 }] },
    bestProbability: 0.8,
  },
];

function recordedSlots(arrivals: number, policy: PolicyChoice): readonly SlotRecord[] {
  const { slots, arrive } = openStudy(set, secret, policy);
  for (let i = 0; i < arrivals; i += 1) arrive({ site: (i * 7) % 5, stratum: i % 2 });
  return slots;
}

describe.each(POLICIES)('replay under the policy $kind', (policy) => {
  const slots = recordedSlots(120, policy);
  const plans = new Map([[1, { set, policy, factorKeys: ['stratum'] }]]);

  function replay(changed: readonly SlotRecord[], slotsIssued = changed.length) {
    const study = { studyId: STUDY_ID, secret, secretHash: secretHashOf(secret), plans };
    return replayAllocations({ ...study, slots: changed, slotsIssued });
  }

  it('verifies what was handed out, in whatever order the records come', () => {
    expect(replay(slots)).toEqual({ verified: 120, firstDifference: null });
    expect(replay(slots.toReversed())).toEqual({ verified: 120, firstDifference: null });
    expect(replay([])).toEqual({ verified: 0, firstDifference: null });
  });

  it('refuses a secret other than the published one', () => {
    const other = secretOf(78);
    const result = replayAllocations({
      studyId: STUDY_ID,
      secret: other,
      secretHash: secretHashOf(secret),
      plans,
      slots,
      slotsIssued: slots.length,
    });
    expect(result).toMatchObject({ verified: 0, firstDifference: { kind: 'secret' } });
  });

  it('finds any changed sequence at its place', () => {
    fc.assert(
      fc.property(fc.nat({ max: 119 }), fc.integer({ min: 1, max: 3 }), (place, shift) => {
        const changed = slots.map((slot, index) =>
          index === place ? { ...slot, sequenceIndex: (slot.sequenceIndex + shift) % 4 } : slot,
        );
        expect(replay(changed)).toMatchObject({
          verified: place,
          firstDifference: { kind: 'sequence', issueNumber: place + 1 },
        });
      }),
    );
  });

  it('finds sequences swapped between two participants', () => {
    fc.assert(
      fc.property(fc.nat({ max: 119 }), fc.nat({ max: 119 }), (a, b) => {
        const [first, second] = [slots[Math.min(a, b)], slots[Math.max(a, b)]];
        if (first === undefined || second === undefined) return;
        fc.pre(first.sequenceIndex !== second.sequenceIndex);
        const swapped = slots.map((slot) => {
          if (slot === first) return { ...slot, sequenceIndex: second.sequenceIndex };
          return slot === second ? { ...slot, sequenceIndex: first.sequenceIndex } : slot;
        });
        expect(replay(swapped)).toMatchObject({
          verified: first.issueNumber - 1,
          firstDifference: { kind: 'sequence', issueNumber: first.issueNumber },
        });
      }),
    );
  });

  it('finds a missing slot, also the last', () => {
    fc.assert(
      fc.property(fc.nat({ max: 119 }), (place) => {
        const rest = slots.filter((_, index) => index !== place);
        const { firstDifference } = replay(rest, 120);
        const kind = place === 119 ? 'slot-count' : 'issue-number';
        expect(firstDifference).toMatchObject({ kind });
      }),
    );
  });

  it('finds a slot missing whose followers were renumbered', () => {
    const rest = slots
      .filter((_, index) => index !== 40)
      .map((slot, index) => ({ ...slot, issueNumber: index + 1 }));
    // The followers met other margins than recorded, and the site's slot numbers have a gap.
    const { verified, firstDifference } = replay(rest, 120);
    expect(firstDifference?.kind).toMatch(/sequence|draws|slot-number/);
    expect(verified).toBeGreaterThanOrEqual(40);
  });

  it.each([
    ['draws', { drawsUsed: 99 }],
    ['protocol-version', { protocolVersion: 2 }],
    ['slot-number', { siteId: 'site-of-nobody' }],
    ['issue-number', { issueNumber: 500 }],
  ] as const)('finds a difference of kind %s', (kind, change) => {
    const changed = slots.map((slot, index) => (index === 60 ? { ...slot, ...change } : slot));
    expect(replay(changed)).toMatchObject({ verified: 60, firstDifference: { kind } });
  });

  it('finds two slots of a site that changed places in the order of issue', () => {
    // The sites take turns five at a time, so places 10 and 15 are neighbours at one site.
    expect(slots[10]?.siteId).toBe(slots[15]?.siteId);
    const changed = slots.map((slot, index) => {
      if (index === 10) return { ...slot, issueNumber: 16 };
      return index === 15 ? { ...slot, issueNumber: 11 } : slot;
    });
    expect(replay(changed)).toMatchObject({
      verified: 10,
      firstDifference: { kind: 'slot-number', issueNumber: 11 },
    });
  });
});
