import { type NotEstimable, notEstimable } from '../estimability.ts';
import { logValues } from '../inference/log-scale.ts';
import type { PeriodObservations } from '../models/period-adjusted-types.ts';
import { MAGNITUDE_MAX } from '../numerics/magnitude.ts';
import type { Measure } from '../protocol/protocol.ts';
import type { AnalysisData, AnalysisParticipant, AnalysisTrial } from './analysis-data.ts';
import { median } from './quantiles.ts';
import type { CellSummary } from './result-types.ts';

/** One value of a measure, with what a count is over. */
export interface MeasureValue {
  readonly period: number;
  readonly condition: string;
  readonly value: number;
  /** Null for measures without exposure, and where the exposure of a count is not known. */
  readonly exposure: number | null;
}

/** All values of one measure that a participant gave, in canonical order. */
export interface ParticipantValues {
  readonly participant: AnalysisParticipant;
  readonly values: readonly MeasureValue[];
}

/** One number a participant and condition; null where there is no value. */
export interface ConditionRow {
  readonly participant: AnalysisParticipant;
  /** By condition, in the order of the protocol. */
  readonly cells: readonly (number | null)[];
}

/**
 * The present values of a measure by participant, in canonical order. Participants without any are
 * in the list with none.
 */
export function valuesOf(data: AnalysisData, measure: Measure): ParticipantValues[] {
  const exposureOf = exposureReader(data, measure);
  return data.participants.map((participant) => ({
    participant,
    values: participant.trials.flatMap((trial) => {
      const value = trial.values[measure.key] ?? null;
      if (value === null) return [];
      const { period, condition } = trial;
      return [{ period, condition, value, exposure: exposureOf(participant, trial) }];
    }),
  }));
}

type ExposureReader = (participant: AnalysisParticipant, trial: AnalysisTrial) => number | null;

/**
 * What gives a count its exposure: the constant; the other measure of the same trial, when that was
 * recorded and lies above zero; or, when the other measure is taken once a period, an equal share
 * of it for each count of the period, so that the shares add up to what was measured.
 */
function exposureReader(data: AnalysisData, measure: Measure): ExposureReader {
  const { exposure } = measure;
  if (exposure === null) return () => null;
  if (exposure.kind === 'constant') return () => exposure.value;
  const other = data.protocol.measures.find(({ key }) => key === exposure.measure);
  const positive = (trial: AnalysisTrial): number | null => {
    const measured = trial.values[exposure.measure] ?? null;
    return measured !== null && measured > 0 ? measured : null;
  };
  if (other?.taken !== 'once-a-period') return (_participant, trial) => positive(trial);
  return ({ trials }, { period }) => {
    const ofPeriod = trials.filter((trial) => trial.period === period);
    const measured = ofPeriod.map(positive).find((value) => value !== null) ?? null;
    const counts = ofPeriod.filter(({ values }) => (values[measure.key] ?? null) !== null);
    return measured === null ? null : measured / counts.length;
  };
}

/** How cells are summarised for least squares and the analysis of variance. */
export function cellSummaryOf(measure: Measure): CellSummary {
  switch (measure.scale) {
    case 'time-like':
      return 'mean-logarithm';
    case 'binary':
      return 'proportion';
    case 'count':
      return measure.exposure?.kind === 'measure' ? 'rate' : 'mean';
    case 'continuous':
    case 'ordinal':
      return 'mean';
  }
}

/** How cells are summarised for the rank methods: as above, but an ordinal cell by its median. */
export function rankCellSummaryOf(measure: Measure): CellSummary {
  return measure.scale === 'ordinal' ? 'median' : cellSummaryOf(measure);
}

/**
 * Why a measure's values cannot be summarised; null when they can: one is beyond 1e100 in size, or
 * its rate is, or it has no logarithm where the summary needs one. A single such value is enough:
 * leaving it out would be an exclusion that nobody registered.
 */
export function valuesFault(
  participants: readonly ParticipantValues[],
  summary: CellSummary,
): NotEstimable | null {
  const values = participants.flatMap((participant) => participant.values);
  const tooLarge = rangeFault(values);
  if (tooLarge !== null || summary !== 'mean-logarithm') return tooLarge;
  const logarithms = logValues(values.map(({ value }) => value));
  return logarithms.estimable ? null : logarithms;
}

/** Why values cannot be squared and added up: one, or its rate, is beyond 1e100 in size. */
export function rangeFault(values: readonly MeasureValue[]): NotEstimable | null {
  const isTooLarge = ({ value, exposure }: MeasureValue): boolean =>
    Math.abs(value) > MAGNITUDE_MAX ||
    (exposure !== null && (exposure > MAGNITUDE_MAX || Math.abs(value) > MAGNITUDE_MAX * exposure));
  const count = values.filter(isTooLarge).length;
  if (count === 0) return null;
  const detail = `${count} of ${values.length} values are beyond 1e100 in size.`;
  return notEstimable('out-of-range', detail);
}

/**
 * One row a participant with at least one usable value, one cell a condition.
 *
 * @param conditionKeys order of the cells
 */
export function conditionRows(
  participants: readonly ParticipantValues[],
  conditionKeys: readonly string[],
  summary: CellSummary,
): ConditionRow[] {
  return participants.flatMap(({ participant, values }) => {
    const byCondition = Map.groupBy(values, ({ condition }) => condition);
    const cells = conditionKeys.map((key) => cellNumber(byCondition.get(key) ?? [], summary));
    return cells.some((cell) => cell !== null) ? [{ participant, cells }] : [];
  });
}

/**
 * One observation a participant, period and condition, so that a participant who was shown two
 * conditions in one period gives two.
 */
export function periodObservations(
  participants: readonly ParticipantValues[],
  conditionKeys: readonly string[],
  periodCount: number,
  summary: CellSummary,
): PeriodObservations {
  const participantIndex: number[] = [];
  const conditionIndex: number[] = [];
  const periodIndex: number[] = [];
  const response: number[] = [];
  let participantCount = 0;
  for (const { values } of participants) {
    const byPeriod = Map.groupBy(values, ({ period }) => period);
    let hasValue = false;
    for (let period = 1; period <= periodCount; period += 1) {
      const byCondition = Map.groupBy(byPeriod.get(period) ?? [], ({ condition }) => condition);
      for (const [index, key] of conditionKeys.entries()) {
        const number = cellNumber(byCondition.get(key) ?? [], summary);
        if (number === null) continue;
        participantIndex.push(participantCount);
        conditionIndex.push(index);
        periodIndex.push(period - 1);
        response.push(number);
        hasValue = true;
      }
    }
    if (hasValue) participantCount += 1;
  }
  return {
    participantIndex,
    conditionIndex,
    periodIndex,
    response,
    participantCount,
    conditionCount: conditionKeys.length,
    periodCount,
  };
}

/** Null when there is no value the summary can use. */
function cellNumber(values: readonly MeasureValue[], summary: CellSummary): number | null {
  if (values.length === 0) return null;
  switch (summary) {
    case 'mean':
    case 'proportion':
      return meanOf(values.map(({ value }) => value));
    case 'mean-logarithm':
      return meanOf(values.map(({ value }) => Math.log(value)));
    case 'median':
      return median(values.map(({ value }) => value));
    case 'rate':
      return rateOf(values)?.rate ?? null;
  }
}

/** Total count over total exposure, of the values whose exposure is known; null when none is. */
export function rateOf(
  values: readonly MeasureValue[],
): { readonly total: number; readonly exposure: number; readonly rate: number } | null {
  let total = 0;
  let exposure = 0;
  for (const value of values) {
    if (value.exposure === null) continue;
    total += value.value;
    exposure += value.exposure;
  }
  return exposure > 0 ? { total, exposure, rate: total / exposure } : null;
}

/**
 * Arithmetic mean, as the first value plus the mean of the differences from it, so that a constant
 * gives itself exactly.
 *
 * @param values at least one
 */
export function meanOf(values: readonly number[]): number {
  const first = values[0]!;
  return first + values.reduce((sum, value) => sum + (value - first), 0) / values.length;
}
