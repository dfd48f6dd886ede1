import type { Measure, Protocol } from '../protocol/protocol.ts';
import type { AnalysisData, AnalysisParticipant, AnalysisTrial } from './analysis-data.ts';

/**
 * Values expected of everybody who arrived, and what became of them. Each expected value is counted
 * once: expected = present + excluded + those with a reason + after withdrawal + erased + not
 * recorded.
 */
export interface MissingData {
  readonly overall: MissingCounts;
  /** By the condition assigned and the period in which it was due. */
  readonly byConditionAndPeriod: readonly {
    readonly condition: string;
    readonly period: number;
    readonly counts: MissingCounts;
  }[];
}

export interface MissingCounts {
  readonly expected: number;
  readonly present: number;
  /** Recorded, then left out by an exclusion rule. */
  readonly excluded: number;
  /** Recorded as missing, by the reason code given. */
  readonly withReason: readonly { readonly reasonCode: string; readonly values: number }[];
  /** No value, and the participant had withdrawn by the end. */
  readonly afterWithdrawal: number;
  readonly erased: number;
  /** No value and no reason: not reached yet, or forgotten. */
  readonly notRecorded: number;
}

interface MutableCounts {
  expected: number;
  present: number;
  excluded: number;
  withReason: Map<string, number>;
  afterWithdrawal: number;
  erased: number;
  notRecorded: number;
}

/** Counts expected against present values of one measure, after exclusions. */
export function missingData(data: AnalysisData, measure: Measure): MissingData {
  const { protocol, conditions } = data;
  const overall = emptyCounts();
  const cells = new Map<string, MutableCounts>();
  const known = new Set(conditions.map(({ key }) => key));
  for (const participant of data.participants) {
    if (participant.frame.ending?.kind === 'void') continue;
    const byPeriod = Map.groupBy(participant.trials, ({ period }) => period);
    for (const [index, condition] of participant.frame.sequence.entries()) {
      const period = index + 1;
      if (!known.has(condition) || period > protocol.periods.count) continue;
      const cell = cells.get(`${condition} ${period}`) ?? emptyCounts();
      cells.set(`${condition} ${period}`, cell);
      const trials = byPeriod.get(period) ?? [];
      for (const slot of expectedTrials(trials, measure, protocol)) {
        countValue(overall, participant, slot, measure.key);
        countValue(cell, participant, slot, measure.key);
      }
    }
  }
  return {
    overall: frozenCounts(overall),
    byConditionAndPeriod: conditions.flatMap(({ key }) =>
      Array.from({ length: protocol.periods.count }, (_, index) => ({
        condition: key,
        period: index + 1,
        counts: frozenCounts(cells.get(`${key} ${index + 1}`) ?? emptyCounts()),
      })),
    ),
  };
}

/**
 * For each value expected in a period, the trials that could hold it: one trial a repetition, or
 * all trials of the period for a measure that is taken once a period.
 */
function expectedTrials(
  trials: readonly AnalysisTrial[],
  measure: Measure,
  protocol: Protocol,
): (readonly AnalysisTrial[])[] {
  if (measure.taken === 'once-a-period') return [trials];
  return Array.from({ length: protocol.periods.repetitions }, (_, index) =>
    trials.filter(({ repetition }) => repetition === index + 1),
  );
}

function countValue(
  counts: MutableCounts,
  { frame }: AnalysisParticipant,
  trials: readonly AnalysisTrial[],
  measure: string,
): void {
  counts.expected += 1;
  const reasonCode = trials
    .map(({ missing }) => missing[measure])
    .find((code) => code !== undefined);
  if (trials.some(({ values }) => (values[measure] ?? null) !== null)) counts.present += 1;
  else if (trials.some(({ excluded }) => excluded.includes(measure))) counts.excluded += 1;
  else if (reasonCode !== undefined) {
    counts.withReason.set(reasonCode, (counts.withReason.get(reasonCode) ?? 0) + 1);
  } else if (frame.content === null) counts.erased += 1;
  else if (frame.ending?.kind === 'withdrawn') counts.afterWithdrawal += 1;
  else counts.notRecorded += 1;
}

function emptyCounts(): MutableCounts {
  return {
    expected: 0,
    present: 0,
    excluded: 0,
    withReason: new Map(),
    afterWithdrawal: 0,
    erased: 0,
    notRecorded: 0,
  };
}

function frozenCounts({ withReason, ...counts }: MutableCounts): MissingCounts {
  return {
    ...counts,
    withReason: [...withReason]
      .map(([reasonCode, values]) => ({ reasonCode, values }))
      .sort((a, b) => (a.reasonCode < b.reasonCode ? -1 : 1)),
  };
}
