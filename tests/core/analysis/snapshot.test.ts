import { createHash } from 'node:crypto';
import { describe, expect, it } from 'vitest';
import {
  assembleSnapshot,
  canonicalSnapshotBody,
  type StoredContent,
  snapshotSha256,
  splitSnapshot,
} from '#core/analysis/snapshot.ts';
import { participantOf, snapshotOf } from './study-of-rows.ts';

const saltOf = (id: string): Uint8Array => new Uint8Array(16).fill(id.charCodeAt(0));

function threeParticipants() {
  return ['a', 'b', 'c'].map((id, index) =>
    participantOf({ id, slotNumber: index + 1 }, [
      { condition: 'x', values: { comfort: 3 + index } },
      { condition: 'y', values: { comfort: 7 } },
    ]),
  );
}

describe('a snapshot in two halves', () => {
  const { body, contents } = splitSnapshot(snapshotOf(threeParticipants()), saltOf);

  it('comes back whole when both halves are there', () => {
    const assembled = assembleSnapshot(body, contents.toReversed());
    if (!assembled.recomputable) throw new Error(assembled.reason);
    expect(
      assembled.snapshot.participants.map(({ content }) => content?.trials[0]?.values),
    ).toEqual([{ comfort: 3 }, { comfort: 4 }, { comfort: 5 }]);
  });

  it('holds no measured value in the body', () => {
    expect(canonicalSnapshotBody(body)).not.toContain('comfort');
  });

  // reference: node:crypto SHA-256 over the bytes of salt and JSON written out here by hand.
  it('commits to a content by SHA-256 over salt and canonical JSON', () => {
    const trial = (condition: string, period: number, value: number) =>
      `{"condition":"${condition}","deviation":false,"endedAt":null,"flags":[],"missing":{},` +
      `"period":${period},"repetition":1,"startedAt":null,"values":{"comfort":${value}}}`;
    const text = `{"participantId":"a","trials":[${trial('x', 1, 3)},${trial('y', 2, 7)}]}`;
    const hash = createHash('sha256').update(saltOf('a')).update(text).digest('hex');
    expect(body.participants[0]?.contentCommitment).toBe(hash);
  });

  it('says who was erased since, and cannot be recomputed', () => {
    expect(assembleSnapshot(body, contents.slice(1))).toEqual({
      recomputable: false,
      reason: 'participant-erased',
      participantIds: ['a'],
    });
  });

  it('says whose content is no longer what was frozen', () => {
    const [first, ...others] = contents as [StoredContent, ...StoredContent[]];
    const [trial] = first.content.trials;
    const altered = {
      salt: first.salt,
      content: { ...first.content, trials: [{ ...trial!, values: { comfort: 6 } }] },
    };
    expect(assembleSnapshot(body, [altered, ...others])).toEqual({
      recomputable: false,
      reason: 'content-altered',
      participantIds: ['a'],
    });
  });

  it('keeps a participant erased before freezing, without data, and stays recomputable', () => {
    const [a, ...others] = threeParticipants();
    const split = splitSnapshot(snapshotOf([{ ...a!, content: null }, ...others]), saltOf);
    expect(split.contents).toHaveLength(2);
    expect(assembleSnapshot(split.body, split.contents)).toMatchObject({ recomputable: true });
  });

  it('has the same bytes whatever the order in which participants and trials came', () => {
    const shuffled = threeParticipants()
      .toReversed()
      .map(({ content, ...frame }) => ({
        ...frame,
        content: { ...content!, trials: content!.trials.toReversed() },
      }));
    const again = splitSnapshot(snapshotOf(shuffled), saltOf).body;
    expect(canonicalSnapshotBody(again)).toBe(canonicalSnapshotBody(body));
    expect(snapshotSha256(again)).toBe(snapshotSha256(body));
  });

  it('has another hash when anything in either half differs', () => {
    const others = threeParticipants();
    others[2] = participantOf({ ...others[2]!, slotNumber: 9 });
    const hashes = [
      snapshotOf(others),
      { ...snapshotOf(threeParticipants()), looks: [] },
      snapshotOf(threeParticipants().slice(1)),
    ].map((snapshot) => snapshotSha256(splitSnapshot(snapshot, saltOf).body));
    expect(new Set([snapshotSha256(body), ...hashes]).size).toBe(4);
  });

  it('refuses a participant twice, and the content of another', () => {
    const [a, b] = threeParticipants();
    expect(() => splitSnapshot(snapshotOf([a!, a!]), saltOf)).toThrow('Participant a occurs twice');
    const mixed = { ...a!, content: b!.content };
    expect(() => splitSnapshot(snapshotOf([mixed]), saltOf)).toThrow('content of another');
  });
});
