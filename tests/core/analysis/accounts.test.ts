import { describe, expect, it } from 'vitest';
import { analysisData } from '#core/analysis/analysis-data.ts';
import { applyExclusions } from '#core/analysis/exclusions.ts';
import { missingData } from '#core/analysis/missing-data.ts';
import { participantFlow } from '#core/analysis/participant-flow.ts';
import type { SnapshotParticipant } from '#core/analysis/snapshot.ts';
import type { ExclusionRule } from '#core/protocol/protocol.ts';
import { factorOf, measureOf, participantOf, protocolOf, snapshotOf } from './study-of-rows.ts';

// Expected counts below were counted by hand from the few records written here.

const time = measureOf({ key: 'time', scale: 'time-like' });
const drops = measureOf({ key: 'drops', scale: 'count', taken: 'once-a-period' });

function protocolWith(exclusions: readonly ExclusionRule[], repetitions = 1) {
  const base = protocolOf({
    withinFactors: [factorOf('glove', ['x', 'y'])],
    measures: [time, drops],
    exclusions,
  });
  return { ...base, periods: { ...base.periods, repetitions } };
}

const completed = (period: number) => ({
  period,
  startedAt: '2026-01-05T09:00:00.000Z',
  completedAt: '2026-01-05T09:30:00.000Z',
  deviations: [],
});

function trialsOf(first: number, second: number) {
  return [
    { condition: 'x', values: { time: first, drops: 1 } },
    { condition: 'y', values: { time: second, drops: 0 } },
  ];
}

describe('exclusion rules', () => {
  const participants = [
    participantOf({ id: 'a', slotNumber: 1 }, trialsOf(400, 20)),
    participantOf({ id: 'b', slotNumber: 2, siteId: 'site-2' }, trialsOf(60, 1.5)),
    participantOf({ id: 'c', slotNumber: 3, periods: [completed(1)] }, trialsOf(500, 30)),
  ];

  function accountOf(exclusions: readonly ExclusionRule[]) {
    return applyExclusions(analysisData(protocolWith(exclusions), snapshotOf(participants)));
  }

  it('apply in their order, and count a value once, for the first that left it out', () => {
    const { account } = accountOf([
      { kind: 'range', measure: 'time', minimum: 2, maximum: 450 },
      { kind: 'time-out', measure: 'time', limit: 60 },
      { kind: 'incomplete-participant', minimumPeriods: 2 },
    ]);
    expect(account.rules.map(({ values }) => values)).toEqual([2, 2, 3]);
    expect(account).toMatchObject({ values: 7, participants: 1 });
    const [range, timeOut, incomplete] = account.rules;
    expect(range).toMatchObject({
      byMeasure: [{ measure: 'time', values: 2 }],
      bySite: [
        { siteId: 'site-1', values: 1, participants: 1 },
        { siteId: 'site-2', values: 1, participants: 1 },
      ],
      excludedValues: [
        { participantId: 'c', measure: 'time', period: 1, repetition: 1 },
        { participantId: 'b', measure: 'time', period: 2, repetition: 1 },
      ],
    });
    // The limit of a time-out is itself left out; 400 was still within the range.
    expect(timeOut?.excludedValues.map(({ participantId }) => participantId)).toEqual(['a', 'b']);
    expect(incomplete).toMatchObject({
      byMeasure: [
        { measure: 'drops', values: 2 },
        { measure: 'time', values: 1 },
      ],
      excludedValues: [],
      excludedParticipants: ['c'],
    });
  });

  it('give another account in another order', () => {
    const { account } = accountOf([
      { kind: 'incomplete-participant', minimumPeriods: 2 },
      { kind: 'range', measure: 'time', minimum: 2, maximum: 450 },
    ]);
    expect(account.rules.map(({ values }) => values)).toEqual([4, 1]);
  });

  it('keep both ends of a range', () => {
    const { account } = accountOf([{ kind: 'range', measure: 'time', minimum: 1.5, maximum: 500 }]);
    expect(account.values).toBe(0);
  });

  it('leave null where a value was, and say which measure was left out', () => {
    const { data } = accountOf([{ kind: 'time-out', measure: 'time', limit: 450 }]);
    const third = data.participants.find(({ frame }) => frame.id === 'c');
    expect(third?.trials[0]).toMatchObject({
      values: { time: null, drops: 1 },
      excluded: ['time'],
    });
  });
});

describe('participant flow', () => {
  const withdrawn: Partial<SnapshotParticipant> = {
    ending: {
      kind: 'withdrawn',
      at: '2026-01-05T10:00:00.000Z',
      reasonCode: 'unwell',
      periodReached: 2,
    },
    periods: [completed(1)],
  };
  const late = '2026-01-06T09:00:00.000Z';
  const participants = [
    participantOf({ id: 'a', slotNumber: 1, ...withdrawn }, trialsOf(10, 20).slice(0, 1)),
    participantOf({ id: 'b', slotNumber: 1, arrivedAt: late }, trialsOf(10, 20)),
    participantOf({ id: 'c', slotNumber: 2, sequence: ['x', 'y'], ...withdrawn }),
    participantOf({ id: 'd', slotNumber: 3, ending: { kind: 'void', at: late } }),
    participantOf({ id: 'e', slotNumber: 3, arrivedAt: late, periods: [] }, []),
    participantOf({ id: 'f', slotNumber: 1, siteId: 'site-2' }, trialsOf(1, 2)),
    participantOf({
      id: 'g',
      slotNumber: 2,
      siteId: 'site-2',
      content: null,
      sequence: ['x', 'y'],
    }),
  ].map((participant) => ({ ...participant, sequence: ['x', 'y'] }));

  function flowOf(list: readonly SnapshotParticipant[]) {
    const snapshot = snapshotOf(list);
    const data = analysisData(protocolWith([]), snapshot);
    return participantFlow(snapshot, data, new Set(['f']));
  }

  it('counts everybody once, by site and overall', () => {
    const { overall, bySite } = flowOf(participants);
    expect(overall).toMatchObject({
      arrived: 6,
      completed: 3,
      underWay: 1,
      withdrawn: 2,
      replaced: 1,
      voided: 1,
      excluded: 1,
      erased: 1,
      withdrawals: [{ reasonCode: 'unwell', periodReached: 2, participants: 2 }],
    });
    expect(bySite.map(({ counts }) => counts.arrived)).toEqual([4, 2]);
    expect(overall.arrived).toBe(overall.completed + overall.underWay + overall.withdrawn);
  });

  it('counts deviations by kind: by trial for another condition, by period for the others', () => {
    const [, second] = participants;
    const deviating = {
      ...second!,
      periods: [{ ...completed(1), deviations: ['too-early', 'out-of-turn'] }, completed(2)],
      content: {
        participantId: 'b',
        trials: second!.content!.trials.map((trial) => ({ ...trial, deviation: true })),
      },
    };
    expect(flowOf([deviating]).overall.deviations).toEqual([
      { kind: 'condition-presented-differs', occurrences: 2, participants: 1 },
      { kind: 'out-of-turn', occurrences: 1, participants: 1 },
      { kind: 'too-early', occurrences: 1, participants: 1 },
    ]);
  });

  it('sets aside and counts what the protocol version does not know', () => {
    const stray = participantOf({ id: 'h', slotNumber: 4 }, [
      { condition: 'x', values: { time: 1 } },
      { condition: 'z', values: { time: 1 } },
    ]);
    const foreign = participantOf({ id: 'i', slotNumber: 5, stratum: 'old' }, trialsOf(1, 2));
    expect(flowOf([stray, foreign]).outsideProtocol).toEqual({ participants: 1, trials: 3 });
  });
});

describe('missing data', () => {
  it('accounts for every expected value once', () => {
    const protocol = protocolWith([{ kind: 'time-out', measure: 'time', limit: 60 }], 2);
    const participant = participantOf({ id: 'a', sequence: ['x', 'y'] }, [
      { condition: 'x', period: 1, repetition: 1, values: { time: 70, drops: null } },
      { condition: 'x', period: 1, repetition: 2, values: { time: 9, drops: 4 } },
      {
        condition: 'x',
        period: 2,
        repetition: 1,
        values: { time: null, drops: null },
        missing: { time: 'lamp-failed' },
      },
    ]);
    const gone = participantOf({
      id: 'b',
      slotNumber: 2,
      sequence: ['y', 'x'],
      ending: { kind: 'withdrawn', at: '', reasonCode: 'unwell', periodReached: 1 },
    });
    const erased = { ...gone, id: 'c', slotNumber: 3, content: null };
    const { data } = applyExclusions(
      analysisData(protocol, snapshotOf([participant, gone, erased])),
    );
    const expected = {
      expected: 12,
      present: 1,
      excluded: 1,
      withReason: [{ reasonCode: 'lamp-failed', values: 1 }],
      afterWithdrawal: 4,
      erased: 4,
      notRecorded: 1,
    };
    expect(missingData(data, time).overall).toEqual(expected);
    // Once a period: the value may stand in either of the two trials.
    expect(missingData(data, drops).overall).toMatchObject({ expected: 6, present: 1, erased: 2 });
    // By the condition assigned: the trial shown under x in period 2 was due under y.
    const cell = missingData(data, time).byConditionAndPeriod.find(
      ({ condition, period }) => condition === 'y' && period === 2,
    );
    expect(cell?.counts).toMatchObject({ expected: 2, notRecorded: 1 });
  });
});
