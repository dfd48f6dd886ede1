import { notEstimable } from '../estimability.ts';
import { geometricMean } from '../inference/log-scale.ts';
import { withinParticipantIntervals } from '../inference/within-participant-intervals.ts';
import { matrixFromRows } from '../numerics/matrix.ts';
import type { Measure } from '../protocol/protocol.ts';
import type { AnalysisData } from './analysis-data.ts';
import {
  cellSummaryOf,
  conditionRows,
  type MeasureValue,
  meanOf,
  type ParticipantValues,
  rangeFault,
  rateOf,
  valuesFault,
} from './cell-summaries.ts';
import type { Descriptives, Distribution, ScaleSummary, Summary } from './descriptive-types.ts';
import { quantile } from './quantiles.ts';
import { wilsonInterval } from './wilson-interval.ts';

/**
 * Descriptive tables of one measure.
 *
 * @param participants values after exclusions, see `valuesOf`
 * @param level        confidence level of the intervals
 */
export function descriptives(
  data: AnalysisData,
  measure: Measure,
  participants: readonly ParticipantValues[],
  level: number,
): Descriptives {
  const conditions = data.conditions.map(({ key }) => key);
  const periods = Array.from({ length: data.protocol.periods.count }, (_, index) => index + 1);
  const sites = [...new Set(data.participants.map(({ frame }) => frame.siteId))];
  const all = gather(participants);
  const byCondition = Map.groupBy(all, ({ condition }) => condition);
  const byPeriod = Map.groupBy(all, ({ period }) => period);
  const summarise = (values: readonly LocatedValue[] = []): Summary =>
    summaryOf(values, measure, level);
  return {
    overall: summarise(all),
    byCondition: conditions.map((condition) => ({
      condition,
      summary: summarise(byCondition.get(condition)),
    })),
    byPeriod: periods.map((period) => ({ period, summary: summarise(byPeriod.get(period)) })),
    byConditionAndPeriod: conditions.flatMap((condition) => {
      const ofCondition = byCondition.get(condition) ?? [];
      return periods.map((period) => ({
        condition,
        period,
        summary: summarise(ofCondition.filter((value) => value.period === period)),
      }));
    }),
    bySiteAndCondition: sites.flatMap((siteId) =>
      conditions.map((condition) => ({
        siteId,
        condition,
        summary: summarise(
          (byCondition.get(condition) ?? []).filter((value) => value.siteId === siteId),
        ),
      })),
    ),
    withinParticipantIntervals: intervals(measure, participants, conditions, level),
  };
}

interface LocatedValue extends MeasureValue {
  readonly participantId: string;
  readonly siteId: string;
}

function gather(participants: readonly ParticipantValues[]): LocatedValue[] {
  return participants.flatMap(({ participant: { frame }, values }) =>
    values.map((value) => ({ ...value, participantId: frame.id, siteId: frame.siteId })),
  );
}

function summaryOf(values: readonly LocatedValue[], measure: Measure, level: number): Summary {
  const fault = rangeFault(values);
  return {
    participants: new Set(values.map(({ participantId }) => participantId)).size,
    trials: values.length,
    distribution:
      fault !== null
        ? fault
        : values.length === 0
          ? notEstimable('too-few-observations', 'There is no value.')
          : { estimable: true, ...distributionOf(values.map(({ value }) => value)) },
    ofScale: scaleSummary(values, measure, level),
  };
}

/**
 * Mean, standard deviation (divisor n − 1), extremes, and quartiles by definition 7 of Hyndman &
 * Fan (1996).
 *
 * @param values at least one
 */
export function distributionOf(values: readonly number[]): Distribution {
  const mean = meanOf(values);
  const squares = values.reduce((sum, value) => sum + (value - mean) ** 2, 0);
  const sorted = Float64Array.from(values).sort();
  return {
    mean,
    standardDeviation: values.length > 1 ? Math.sqrt(squares / (values.length - 1)) : null,
    minimum: sorted[0]!,
    lowerQuartile: quantile(sorted, 0.25),
    median: quantile(sorted, 0.5),
    upperQuartile: quantile(sorted, 0.75),
    maximum: sorted[sorted.length - 1]!,
  };
}

function scaleSummary(
  values: readonly LocatedValue[],
  measure: Measure,
  level: number,
): ScaleSummary {
  const none = notEstimable('too-few-observations', 'There is no value.');
  const numbers = values.map(({ value }) => value);
  switch (measure.scale) {
    case 'continuous':
      return { scale: 'continuous' };
    case 'time-like':
      return { scale: 'time-like', geometricMean: geometricMean(numbers) };
    case 'count':
      return { scale: 'count', rate: countRate(values, measure) };
    case 'binary': {
      if (numbers.length === 0) return { scale: 'binary', proportion: none };
      const trials = numbers.length;
      const successes = numbers.reduce((sum, value) => sum + value, 0);
      const interval = wilsonInterval(successes, trials, level);
      const proportion = { successes, trials, proportion: successes / trials, interval };
      return { scale: 'binary', proportion: { estimable: true, ...proportion } };
    }
    case 'ordinal':
      return {
        scale: 'ordinal',
        points: (measure.points ?? []).map(({ value, label }) => ({
          value,
          label,
          trials: numbers.filter((number) => number === value).length,
        })),
      };
  }
}

function countRate(
  values: readonly LocatedValue[],
  { exposure }: Measure,
): Extract<ScaleSummary, { scale: 'count' }>['rate'] {
  const fault = rangeFault(values);
  if (fault !== null) return fault;
  // A count without a registered exposure is a count a trial.
  const exposed = exposure === null ? values.map((value) => ({ ...value, exposure: 1 })) : values;
  const rate = rateOf(exposed);
  if (rate === null) {
    return notEstimable('too-few-observations', 'There is no value with a known exposure.');
  }
  const exposureUnit =
    exposure === null ? null : exposure.kind === 'constant' ? exposure.unit : exposure.measure;
  return { estimable: true, ...rate, exposureUnit };
}

function intervals(
  measure: Measure,
  participants: readonly ParticipantValues[],
  conditions: readonly string[],
  level: number,
): Descriptives['withinParticipantIntervals'] {
  const cellSummary = cellSummaryOf(measure);
  const fault = valuesFault(participants, cellSummary);
  if (fault !== null) return { cellSummary, level, intervals: fault };
  const rows = conditionRows(participants, conditions, cellSummary).flatMap(({ cells }) => {
    const complete = cells.filter((cell) => cell !== null);
    return complete.length === conditions.length ? [complete] : [];
  });
  if (rows.length < 2) {
    const detail = `${rows.length} of the participants gave every condition; at least 2 must.`;
    const result = notEstimable('too-few-participants', detail);
    return { cellSummary, level, intervals: result };
  }
  const found = withinParticipantIntervals(matrixFromRows(rows), level);
  if (!found.estimable) return { cellSummary, level, intervals: found };
  const back = cellSummary === 'mean-logarithm' ? Math.exp : (value: number): number => value;
  if (found.conditions.some(({ interval }) => !Number.isFinite(back(interval.upper)))) {
    const detail = 'An end of an interval is too large to be carried back from logarithms.';
    return { cellSummary, level, intervals: notEstimable('out-of-range', detail) };
  }
  return {
    cellSummary,
    level,
    intervals: {
      estimable: true,
      participants: found.participants,
      conditions: found.conditions.map(({ mean, interval }, index) => ({
        condition: conditions[index]!,
        mean: back(mean),
        interval: { level, lower: back(interval.lower), upper: back(interval.upper) },
      })),
    },
  };
}
