import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { AnalysisStopped, runPlan } from '#core/analysis/run-plan.ts';
import { type Snapshot, type SnapshotTrial, splitSnapshot } from '#core/analysis/snapshot.ts';
import { canonicalJson, jsonValueOf } from '#core/hashing/canonical-json.ts';
import type { Protocol } from '#core/protocol/protocol.ts';
import { reportPage } from '#core/reporting/page.ts';
import { canonicalReportBody, reportBody } from '#core/reporting/report-body.ts';
import { nonFinitePaths } from '../../support/finite-numbers.ts';
import { mixedProtocol, mixedValues } from './mixed-study.ts';
import {
  factorOf,
  measureOf,
  participantOf,
  planOf,
  protocolOf,
  type Row,
  snapshotOf,
  snapshotOfRows,
} from './study-of-rows.ts';

const gloves = ['bare', 'thin', 'thick'];

/** People in the cyclic order, person n starting with condition n. */
function mixedRows(
  people: number,
  valuesOf: (person: number, condition: number, period: number) => SnapshotTrial['values'],
): Row[] {
  return Array.from({ length: people }, (_, person) =>
    gloves.map((_glove, index) => {
      const condition = (person + index) % 3;
      return {
        participant: `p${person}`,
        site: `site-${1 + (person % 2)}`,
        condition: gloves[condition]!,
        period: index + 1,
        values: valuesOf(person, condition, index + 1),
      };
    }),
  ).flat();
}

function treeOf(protocol: Protocol, snapshot: Snapshot) {
  return runPlan(protocol, snapshot, { seed: 'any' });
}

/** Runs everything down to the page; throws where anything could not be carried by JSON. */
function wholeReport(protocol: Protocol, snapshot: Snapshot): { text: string; page: string } {
  const { body } = splitSnapshot(snapshot, () => new Uint8Array(16));
  const report = reportBody({
    protocol,
    protocolVersion: 1,
    protocolSha256: 'a'.repeat(64),
    snapshotBody: body,
    snapshotSha256: 'b'.repeat(64),
    engineVersion: 'engine of the test',
    seed: 'any',
    result: treeOf(protocol, snapshot),
  });
  expect(nonFinitePaths(report)).toEqual([]);
  const page = reportPage(report, 'c'.repeat(64));
  expect(page).not.toMatch(/NaN|Infinity|undefined|\[object/);
  return { text: canonicalReportBody(report), page };
}

describe('runPlan', () => {
  const protocol = mixedProtocol();
  const rows = mixedRows(12, mixedValues);

  it('gives the same bytes for the same input, and for another order of participants', () => {
    const once = wholeReport(protocol, snapshotOfRows(rows));
    const snapshot = snapshotOfRows(rows);
    const shuffled = {
      ...snapshot,
      participants: snapshot.participants.toReversed().map((participant) => ({
        ...participant,
        content: {
          ...participant.content!,
          trials: participant.content!.trials.toReversed(),
        },
      })),
    };
    expect(wholeReport(protocol, snapshotOfRows(rows))).toEqual(once);
    expect(wholeReport(protocol, shuffled)).toEqual(once);
  });

  it('does not change what it was given', () => {
    const snapshot = snapshotOfRows(rows);
    const before = canonicalJson(jsonValueOf(snapshot));
    treeOf(protocol, snapshot);
    expect(canonicalJson(jsonValueOf(snapshot))).toBe(before);
  });

  it('answers for every measure, and labels what the plan did not foresee', () => {
    const { measures } = treeOf(protocol, snapshotOfRows(rows));
    const standings = Object.fromEntries(
      measures.map(({ measure, standing, method }) => [measure, [standing, method?.method]]),
    );
    expect(standings).toEqual({
      time: ['confirmatory', 'repeated-measures-anova'],
      force: ['confirmatory', 'repeated-measures-anova'],
      drops: ['confirmatory', 'repeated-measures-anova'],
      pegs: ['exploratory', undefined],
      seated: ['confirmatory', 'friedman'],
      comfort: ['confirmatory', 'friedman'],
    });
    for (const { order } of measures) expect(order.standing).toBe('exploratory');
    expect(measures.map(({ order }) => order.approximation)).toEqual([
      false,
      false,
      true,
      true,
      true,
      true,
    ]);
  });

  it('never lets a test switch the primary estimate', () => {
    const flat = mixedRows(12, (person, condition) => ({
      ...mixedValues(person, condition, 0),
      force: 50 + condition + ((person * 7 + condition * 5) % 11),
    }));
    const steep = flat.map((entry) => ({
      ...entry,
      values: { ...entry.values, force: (entry.values.force as number) + 100 * entry.period },
    }));
    const uses = [flat, steep].map((data) => {
      const force = treeOf(protocol, snapshotOfRows(data)).measures[1]!;
      return force.method?.comparisonSets.map(({ use, estimate }) => `${use} ${estimate}`);
    });
    expect(uses[0]).toEqual(['primary unadjusted', 'sensitivity adjusted-for-period']);
    expect(uses[1]).toEqual(uses[0]);
  });

  it('tells its stages in order, and stops between them when asked', () => {
    const stages: [number, string][] = [];
    runPlan(protocol, snapshotOfRows(rows), {
      seed: 'any',
      onProgress: (fraction, stage) => stages.push([fraction, stage]),
    });
    expect(stages[0]).toEqual([0, 'participants and exclusions']);
    expect(stages.at(-1)).toEqual([1, 'finished']);
    expect(stages.map(([fraction]) => fraction)).toEqual(
      stages.map(([fraction]) => fraction).toSorted((a, b) => a - b),
    );
    let asked = 0;
    const stopping = () =>
      runPlan(protocol, snapshotOfRows(rows), {
        seed: 'any',
        shouldStop: () => {
          asked += 1;
          return asked > 2;
        },
      });
    expect(stopping).toThrow(AnalysisStopped);
    expect(stopping).toThrow('stopped before this stage');
  });

  it('analyses a trial under the condition presented', () => {
    const one = protocolOf({
      withinFactors: [factorOf('glove', ['x', 'y'])],
      measures: [measureOf({ key: 'score' })],
    });
    const swapped = participantOf({ id: 'a', sequence: ['x', 'y'] }, [
      { condition: 'y', values: { score: 5 }, deviation: true },
      { condition: 'x', values: { score: 3 }, deviation: true },
    ]);
    const [result] = treeOf(one, snapshotOf([swapped])).measures;
    const means = result!.descriptives.byCondition.map(({ condition, summary }) => [
      condition,
      summary.distribution.estimable && summary.distribution.mean,
    ]);
    expect(means).toEqual([
      ['x', 3],
      ['y', 5],
    ]);
  });

  it('counts equal decimals as tied, whatever binary arithmetic makes of them', () => {
    const ranked = protocolOf({
      withinFactors: [factorOf('glove', ['x', 'y', 'z'])],
      measures: [measureOf({ key: 'score' })],
      analysis: {
        measures: [planOf({ measure: 'score', method: 'friedman', primaryEstimate: 'unadjusted' })],
      },
    });
    // Differences of x and y are 0.1 for everybody; in binary they are not all the same.
    const scores = [
      [0.3, 0.2, 0.9],
      [0.8, 0.7, 0.1],
      [1.1, 1, 0.5],
      [0.4, 0.3, 0.2],
    ];
    const data = scores.flatMap((own, person) =>
      own.map((score, index) => ({
        participant: `p${person}`,
        condition: ['x', 'y', 'z'][index]!,
        period: index + 1,
        values: { score },
      })),
    );
    const [result] = treeOf(ranked, snapshotOfRows(data)).measures;
    const [first] = result!.method!.comparisonSets[0]!.comparisons;
    expect(first).toMatchObject({
      estimate: 0.1,
      statistic: { positiveRankSum: 10, negativeRankSum: 0 },
    });
    // Exact, all four positive and tied: 2 · (1/2)⁴. From the definition of the test.
    expect(first).toMatchObject({ pValue: 0.125 });
  });
});

describe('runPlan on data that cannot answer', () => {
  const protocol = mixedProtocol();

  function reasons(snapshot: Snapshot, measure = 'force'): string[] {
    wholeReport(protocol, snapshot);
    const found = treeOf(protocol, snapshot).measures.find((entry) => entry.measure === measure)!;
    const { method, order } = found;
    if (method?.method !== 'repeated-measures-anova') throw new Error('another method ran');
    return [
      method.anova,
      order.fit,
      ...method.comparisonSets.flatMap((set) => set.comparisons),
    ].map((result) => (result.estimable ? 'estimable' : result.reason));
  }

  it('names the reason when nobody came', () => {
    expect(new Set(reasons(snapshotOf([])))).toEqual(new Set(['too-few-participants']));
  });

  it('names the reason with one participant', () => {
    expect(reasons(snapshotOfRows(mixedRows(1, mixedValues)))).not.toContain('estimable');
  });

  it('names the reason when only one condition was ever seen', () => {
    const rows = mixedRows(6, mixedValues).filter(({ condition }) => condition === 'bare');
    expect(reasons(snapshotOfRows(rows))).not.toContain('estimable');
  });

  it('names the reason when every value is the same', () => {
    const rows = mixedRows(6, (...where) => ({ ...mixedValues(...where), force: 7 }));
    expect(reasons(snapshotOfRows(rows))).not.toContain('estimable');
  });

  it('names the reason when nobody is complete, and still fits what there is', () => {
    const rows = mixedRows(9, mixedValues).filter(
      ({ participant, period }) => period !== 1 + (Number(participant.slice(1)) % 3),
    );
    const [anova, fit] = reasons(snapshotOfRows(rows));
    expect([anova, fit]).toEqual(['too-few-participants', 'estimable']);
  });

  it('does not drop a time of zero to make logarithms possible', () => {
    const rows = mixedRows(6, (person, condition, period) => ({
      ...mixedValues(person, condition, period),
      ...(person === 2 && condition === 1 ? { time: 0 } : {}),
    }));
    expect(new Set(reasons(snapshotOfRows(rows), 'time'))).toEqual(new Set(['non-positive-value']));
  });

  it('carries no value too large to be squared, and no interval too wide for a ratio', () => {
    const vast = mixedRows(4, (person, condition, period) => ({
      ...mixedValues(person, condition, period),
      ...(person === 2 && condition === 1 ? { force: 1e300, drops: 5, pegs: 1e-300 } : {}),
    }));
    expect(new Set(reasons(snapshotOfRows(vast)))).toEqual(new Set(['out-of-range']));
    const spread = mixedRows(2, (person, condition) => ({
      ...mixedValues(person, condition, 0),
      time: [1e-60, 1, 1e60][(person + condition * (person + 1)) % 3]!,
    }));
    const { text } = wholeReport({ ...protocol, exclusions: [] }, snapshotOfRows(spread));
    expect(text).toContain('too far from 1 to be carried back');
  });

  it('keeps the family as large as planned when a comparison is missing', () => {
    const rows = mixedRows(9, (person, condition, period) => ({
      ...mixedValues(person, condition, period),
      ...(condition === 2 ? { drops: null, time: null } : {}),
    }));
    const { measures } = treeOf(protocol, snapshotOfRows(rows));
    // By Holm for the one, by Bonferroni for the other: the smallest of three p-values, three times.
    const [time, , drops] = measures;
    for (const set of [time!, drops!].flatMap(({ method }) => method!.comparisonSets)) {
      const [first, ...others] = set.comparisons;
      expect(others.map(({ estimable }) => estimable)).toEqual([false, false]);
      if (first?.estimable !== true) throw new Error('bare and thin were both measured');
      expect(first.adjustedPValue).toBe(Math.min(1, 3 * first.pValue));
    }
  });

  it('carries nothing but finite numbers, whatever holes the data have', () => {
    const value = fc.oneof(
      { weight: 5, arbitrary: fc.constant('usual' as const) },
      fc.constant('none' as const),
      fc.constant('zero' as const),
      fc.constant('same' as const),
      fc.constant('huge' as const),
    );
    const presence = fc.array(value, { minLength: 3, maxLength: 3 });
    fc.assert(
      fc.property(fc.array(presence, { maxLength: 7 }), (people) => {
        const rows = mixedRows(people.length, (person, condition, period) => {
          const usual = mixedValues(person, condition, period);
          switch (people[person]?.[condition]) {
            case 'none':
              return Object.fromEntries(Object.keys(usual).map((key) => [key, null]));
            case 'zero':
              return { ...usual, time: 0, force: 0, drops: 0, pegs: 0 };
            case 'huge':
              return { ...usual, time: 1e99, force: 1e200, drops: 1e250, pegs: 1e-250 };
            case 'same':
              return { time: 1, force: 1, drops: 1, pegs: 1, seated: true, comfort: 1 };
            default:
              return usual;
          }
        });
        wholeReport(protocol, snapshotOfRows(rows));
      }),
      { numRuns: 150, seed: 20261201 },
    );
  });
});
