import { assert } from '../errors.ts';
import type { ConditionFit } from '../models/period-adjusted-types.ts';
import type { Measure } from '../protocol/protocol.ts';
import type { AnalysisData } from './analysis-data.ts';
import type { CellSummary, OrderResult } from './result-types.ts';

/**
 * What order did to one measure, from participant + condition + period by least squares, whatever
 * the method of the measure. Nothing is switched on or off by what this finds (Freeman 1989).
 * Carryover joins the result here, beside period.
 *
 * @param fit see `MethodInput`
 */
export function orderResult(
  data: AnalysisData,
  measure: Measure,
  summary: CellSummary,
  fit: ConditionFit,
): OrderResult {
  return {
    standing: 'exploratory',
    summary,
    approximation: measure.scale !== 'continuous' && measure.scale !== 'time-like',
    fit: orderFit(data, fit),
  };
}

function orderFit({ conditions }: AnalysisData, fit: ConditionFit): OrderResult['fit'] {
  if (!fit.estimable) return fit;
  const { period, rank } = fit;
  assert(period !== null, 'the fit with period holds effects of period');
  return {
    estimable: true,
    observations: fit.observations,
    participants: fit.participants,
    residualDegreesOfFreedom: fit.residualDegreesOfFreedom,
    residualStandardDeviation: fit.residualStandardDeviation,
    notSeparable: {
      conditions: rank.droppedConditions.map((index) => conditions[index]!.key),
      periods: rank.droppedPeriods.map((index) => index + 1),
    },
    conditionTest: fit.conditionTest,
    conditionMeans: fit.conditionMeans.map(({ conditionIndex, ...mean }) => ({
      condition: conditions[conditionIndex]!.key,
      ...mean,
    })),
    periodTest: period.test,
    periodMeans: period.means.map(({ periodIndex, ...mean }) => ({
      period: periodIndex + 1,
      ...mean,
    })),
    linearTrend: period.linearTrend,
  };
}
