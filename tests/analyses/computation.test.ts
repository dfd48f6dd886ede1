import { describe, expect, it } from 'vitest';
import {
  canonicalSnapshotBody,
  type SnapshotParticipant,
  type SnapshotTrial,
  snapshotSha256,
  splitSnapshot,
} from '#core/analysis/snapshot.ts';
import { canonicalJson, jsonValueOf } from '#core/hashing/canonical-json.ts';
import { sha256Hex } from '#core/hashing/digest.ts';
import type { ComputationInput, ComputationOutcome } from '#server/analyses/computation.ts';
import { computeInThread } from '#server/analyses/compute-in-thread.ts';
import { ProtocolDocument } from '#server/studies/schemas.ts';
import { gloveProtocol } from '../support/analysed-study.ts';

const SITE = '01970000-0000-7000-8000-000000000001';
const protocol = ProtocolDocument.parse(gloveProtocol(SITE));
const protocolSha256 = sha256Hex(canonicalJson(jsonValueOf(protocol)));

/** Invented data of six people, salted with `saltByte`. */
function inputOf(saltByte: number): ComputationInput {
  const { body, contents } = splitSnapshot(
    {
      studyId: '01970000-0000-7000-8000-0000000000ff',
      enrolment: 'closed',
      protocolVersions: [{ number: 1, sha256: protocolSha256 }],
      sites: [{ siteId: SITE, label: 'Quay', targetEnrolment: 6 }],
      looks: [{ kind: 'analysis', duringEnrolment: false, count: 1 }],
      participants: [1, 2, 3, 4, 5, 6].map(participant),
    },
    () => new Uint8Array(16).fill(saltByte),
  );
  return {
    protocol,
    protocolVersion: 1,
    protocolSha256,
    snapshotBody: canonicalSnapshotBody(body),
    snapshotSha256: snapshotSha256(body),
    contents: contents.map(({ salt, content }) => ({ salt, content: JSON.stringify(content) })),
    seed: '00'.repeat(16),
  };
}

function participant(number: number): Omit<SnapshotParticipant, 'contentCommitment'> {
  const id = `01970000-0000-7000-8000-00000000001${number}`;
  const sequence = number % 2 === 0 ? ['thin', 'thick'] : ['thick', 'thin'];
  const at = '2026-11-03T09:00:00.000Z';
  const trials = sequence.flatMap((condition, index) =>
    [1, 2].map((repetition): SnapshotTrial => {
      const seconds = 20 + number + (condition === 'thick' ? 4 : 0) - index + repetition / 10;
      return {
        period: index + 1,
        repetition,
        condition,
        deviation: false,
        flags: [],
        values: { time: seconds + ((number * 7) % 5) / 10 },
        missing: {},
        startedAt: at,
        endedAt: null,
      };
    }),
  );
  return {
    id,
    siteId: SITE,
    stratum: 'all',
    protocolVersion: 1,
    slotNumber: number,
    sequence,
    arrivedAt: at,
    ending: null,
    periods: [1, 2].map((period) => ({ period, startedAt: at, completedAt: at, deviations: [] })),
    content: { participantId: id, trials },
  };
}

const run = (input: ComputationInput): Promise<ComputationOutcome> =>
  computeInThread(input, { signal: new AbortController().signal, onProgress: () => undefined })
    .outcome;

// common practice, no source: a report is a function of what it was made from.
describe('a computation in its thread', () => {
  it('gives the same bytes for the same input, in whatever order the contents come', async () => {
    const input = inputOf(1);
    const [one, two, reordered] = await Promise.all([
      run(input),
      run(input),
      run({ ...input, contents: input.contents.toReversed() }),
    ]);
    expect(one?.kind).toBe('computed');
    expect(two).toEqual(one);
    expect(reordered).toEqual(one);
  });

  it('gives other bytes for another seed or another snapshot', async () => {
    const outcomes = await Promise.all([
      run(inputOf(1)),
      run({ ...inputOf(1), seed: '01'.repeat(16) }),
      run(inputOf(2)),
    ]);
    const hashes = outcomes.map((outcome) =>
      outcome.kind === 'computed' ? outcome.report.sha256 : outcome.kind,
    );
    expect(new Set(hashes).size).toBe(3);
  });

  it('tells its progress, from nothing to all', async () => {
    const fractions: number[] = [];
    const { outcome } = computeInThread(inputOf(1), {
      signal: new AbortController().signal,
      onProgress: (fraction) => fractions.push(fraction),
    });
    await outcome;
    expect(fractions[0]).toBe(0);
    expect(fractions.at(-1)).toBe(1);
    expect(fractions).toEqual([...fractions].sort((a, b) => a - b));
  });

  it('stops at the next stage when asked', async () => {
    const computation = computeInThread(inputOf(1), {
      signal: new AbortController().signal,
      onProgress: () => undefined,
    });
    computation.requestStop();
    expect(await computation.outcome).toEqual({ kind: 'stopped' });
  });

  it('is broken off at once by its signal', async () => {
    const abort = new AbortController();
    const { outcome } = computeInThread(inputOf(1), {
      signal: abort.signal,
      onProgress: () => undefined,
    });
    abort.abort();
    await expect(outcome).rejects.toThrow('broken off');
  });

  it('tells how many participants were erased', async () => {
    const input = inputOf(1);
    const outcome = await run({ ...input, contents: input.contents.slice(2) });
    expect(outcome).toEqual({ kind: 'erased', participants: 2 });
  });

  it('notices a protocol, a snapshot or a content that was altered', async () => {
    const input = inputOf(1);
    const [first, ...others] = input.contents;
    const content = first?.content.replace('"repetition":2', '"repetition":3') ?? '';
    const outcomes = await Promise.all([
      run({ ...input, protocol: { ...protocol, title: 'Another title' } }),
      run({ ...input, snapshotBody: input.snapshotBody.replace('Quay', 'Kay') }),
      run({ ...input, contents: [{ salt: new Uint8Array(16).fill(1), content }, ...others] }),
    ]);
    expect(outcomes).toEqual([
      { kind: 'altered', what: 'protocol' },
      { kind: 'altered', what: 'snapshot' },
      { kind: 'altered', what: 'snapshot' },
    ]);
  });

  it('says where it broke without repeating what it was given', async () => {
    const input = inputOf(1);
    const [first, ...others] = input.contents;
    const broken = { salt: first?.salt ?? new Uint8Array(16), content: '{"secret value' };
    const outcome = await run({ ...input, contents: [broken, ...others] });
    expect(outcome.kind).toBe('fault');
    expect(JSON.stringify(outcome)).toContain('SyntaxError');
    expect(JSON.stringify(outcome)).not.toContain('secret value');
  });
});
