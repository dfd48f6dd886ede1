import type { ExclusionRule } from '../protocol/protocol.ts';
import type { AnalysisData, AnalysisParticipant, AnalysisTrial } from './analysis-data.ts';
import type { ExcludedValue, ExclusionAccount, RuleAccount } from './exclusion-types.ts';
import { completedPeriods } from './participant-flow.ts';

/**
 * Applies the registered exclusion rules in their order, each to what the rules before it left.
 *
 * A value left out becomes null and its measure is noted in the trial's `excluded`. The range rule
 * keeps its ends; the time-out rule leaves out the limit itself. `incomplete-participant` leaves
 * out every remaining value of a participant with fewer completed periods, and counts participants
 * who had at least one.
 *
 * @returns the data without what was left out, and the account of it
 */
export function applyExclusions(data: AnalysisData): {
  data: AnalysisData;
  account: ExclusionAccount;
} {
  let participants = data.participants;
  const rules: RuleAccount[] = [];
  for (const rule of data.protocol.exclusions) {
    const excludes = excludesValue(rule);
    const left: Left[] = [];
    participants = participants.map((participant) => {
      const values: ExcludedValue[] = [];
      const trials = participant.trials.map((trial) =>
        trialWithout(trial, participant, excludes, values),
      );
      if (values.length === 0) return participant;
      left.push({ participant, values });
      return { ...participant, trials };
    });
    rules.push(ruleAccount(rule, left));
  }
  const account: ExclusionAccount = {
    rules,
    values: rules.reduce((sum, { values }) => sum + values, 0),
    participants: new Set(rules.flatMap(({ excludedParticipants }) => excludedParticipants)).size,
  };
  return { data: { ...data, participants }, account };
}

/** What one rule left out of one participant. */
interface Left {
  readonly participant: AnalysisParticipant;
  readonly values: readonly ExcludedValue[];
}

type Excludes = (measure: string, value: number, participant: AnalysisParticipant) => boolean;

function excludesValue(rule: ExclusionRule): Excludes {
  switch (rule.kind) {
    case 'range':
      return (measure, value) =>
        measure === rule.measure &&
        ((rule.minimum !== null && value < rule.minimum) ||
          (rule.maximum !== null && value > rule.maximum));
    case 'time-out':
      return (measure, value) => measure === rule.measure && value >= rule.limit;
    case 'incomplete-participant':
      return (_measure, _value, { frame }) => completedPeriods(frame) < rule.minimumPeriods;
  }
}

function trialWithout(
  trial: AnalysisTrial,
  participant: AnalysisParticipant,
  excludes: Excludes,
  values: ExcludedValue[],
): AnalysisTrial {
  const measures = Object.entries(trial.values)
    .filter(([measure, value]) => value !== null && excludes(measure, value, participant))
    .map(([measure]) => measure)
    .sort();
  if (measures.length === 0) return trial;
  const { period, repetition } = trial;
  for (const measure of measures) {
    values.push({ participantId: participant.frame.id, measure, period, repetition });
  }
  const removed = Object.fromEntries(measures.map((measure) => [measure, null]));
  return {
    ...trial,
    values: { ...trial.values, ...removed },
    excluded: [...trial.excluded, ...measures],
  };
}

function ruleAccount(rule: ExclusionRule, left: readonly Left[]): RuleAccount {
  const all = left.flatMap(({ values }) => values);
  const isOnParticipants = rule.kind === 'incomplete-participant';
  const bySite = Map.groupBy(left, ({ participant }) => participant.frame.siteId);
  const byMeasure = Map.groupBy(all, ({ measure }) => measure);
  return {
    rule,
    values: all.length,
    byMeasure: [...byMeasure]
      .map(([measure, values]) => ({ measure, values: values.length }))
      .sort((a, b) => (a.measure < b.measure ? -1 : 1)),
    bySite: [...bySite]
      .map(([siteId, group]) => ({
        siteId,
        values: group.reduce((sum, { values }) => sum + values.length, 0),
        participants: group.length,
      }))
      .sort((a, b) => (a.siteId < b.siteId ? -1 : 1)),
    excludedValues: isOnParticipants ? [] : all,
    excludedParticipants: isOnParticipants
      ? left.map(({ participant }) => participant.frame.id)
      : [],
  };
}
