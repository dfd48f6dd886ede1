import type { ConditionFit } from '../../models/period-adjusted-types.ts';
import type { AnalysisMethod, Measure, MeasurePlan } from '../../protocol/protocol.ts';
import type { AnalysisData } from '../analysis-data.ts';
import type { ParticipantValues } from '../cell-summaries.ts';
import type { CellSummary, MethodResult, Standing } from '../result-types.ts';

/** What every method of analysis is given. */
export interface MethodInput {
  readonly data: AnalysisData;
  readonly measure: Measure;
  readonly plan: MeasurePlan;
  readonly standing: Standing;
  /** Values after exclusions, see `valuesOf`. */
  readonly participants: readonly ParticipantValues[];
  /** How the cells of `periodFit` were summarised. */
  readonly fitSummary: CellSummary;
  /** participant + condition + period by least squares; or why its values cannot be used. */
  readonly fit: ConditionFit;
  readonly seed: string;
}

/** One method of analysis: the room of each is the file of its name in this folder. */
export interface Method {
  readonly key: AnalysisMethod;
  readonly run: (input: MethodInput) => MethodResult;
}
