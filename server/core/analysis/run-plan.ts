import { periodAdjustedFit } from '../models/period-adjusted-fit.ts';
import type { ConditionFit } from '../models/period-adjusted-types.ts';
import type { Measure, Protocol } from '../protocol/protocol.ts';
import { type AnalysisData, analysisData } from './analysis-data.ts';
import { cellSummaryOf, periodObservations, valuesFault, valuesOf } from './cell-summaries.ts';
import { descriptives } from './descriptives.ts';
import { applyExclusions } from './exclusions.ts';
import { METHODS } from './methods/registry.ts';
import { missingData } from './missing-data.ts';
import { orderResult } from './order.ts';
import { participantFlow } from './participant-flow.ts';
import type { MeasureResult, ResultTree, Standing } from './result-types.ts';
import type { Snapshot } from './snapshot.ts';

/** Confidence level of intervals for a measure without a plan of its own. */
const UNPLANNED_CONFIDENCE_LEVEL = 0.95;

/** Thrown by {@link runPlan} when it was asked to stop. */
export class AnalysisStopped extends Error {
  override readonly name = 'AnalysisStopped';
}

export interface RunPlanOptions {
  /** Of whatever draws random numbers. */
  readonly seed: string;
  /** Called as each stage begins with the fraction done, 0 to 1, and at the end with 1. */
  readonly onProgress?: (fraction: number, stage: string) => void;
  /** Asked before each stage. */
  readonly shouldStop?: () => boolean;
}

/**
 * Runs the registered plan on a snapshot: exclusions in their order, participant flow, then for
 * each measure its descriptives, missing data, planned method and order effects.
 *
 * A pure function: equal protocol, snapshot and seed give an equal tree, whatever the order in
 * which the snapshot lists participants and trials. What cannot be estimated says why in its place;
 * no number in the tree is NaN or infinite.
 *
 * @throws {AnalysisStopped} when `shouldStop` answers true
 */
export function runPlan(
  protocol: Protocol,
  snapshot: Snapshot,
  options: RunPlanOptions,
): ResultTree {
  const stageCount = protocol.measures.length + 1;
  let stagesDone = 0;
  const begin = (stage: string): void => {
    if (options.shouldStop?.() === true) {
      throw new AnalysisStopped(`The analysis was stopped before this stage: ${stage}`);
    }
    options.onProgress?.(stagesDone / stageCount, stage);
    stagesDone += 1;
  };
  begin('participants and exclusions');
  const all = analysisData(protocol, snapshot);
  const { data, account } = applyExclusions(all);
  const excluded = new Set(account.rules.flatMap((rule) => rule.excludedParticipants));
  const flow = participantFlow(snapshot, data, excluded);
  const measures = protocol.measures.map((measure) => {
    begin(`measure ${measure.key}`);
    return measureResult(data, measure, options.seed);
  });
  options.onProgress?.(1, 'finished');
  return { participantFlow: flow, exclusions: account, measures };
}

function measureResult(data: AnalysisData, measure: Measure, seed: string): MeasureResult {
  const { protocol, conditions } = data;
  const plan = protocol.analysis.measures.find((entry) => entry.measure === measure.key) ?? null;
  const standing: Standing = plan === null ? 'exploratory' : 'confirmatory';
  const level = plan === null ? UNPLANNED_CONFIDENCE_LEVEL : 1 - plan.alpha;
  const participants = valuesOf(data, measure);
  const fitSummary = cellSummaryOf(measure);
  const conditionKeys = conditions.map(({ key }) => key);
  const fit: ConditionFit =
    valuesFault(participants, fitSummary) ??
    periodAdjustedFit(
      periodObservations(participants, conditionKeys, protocol.periods.count, fitSummary),
      { confidenceLevel: level },
    ).adjusted;
  const input = { data, measure, standing, participants, fitSummary, fit, seed };
  return {
    measure: measure.key,
    scale: measure.scale,
    standing,
    plan,
    descriptives: descriptives(data, measure, participants, level),
    missing: missingData(data, measure),
    method: plan === null ? null : METHODS[plan.method].run({ ...input, plan }),
    order: orderResult(data, measure, fitSummary, fit),
  };
}
