import type { OrderFit } from '../../analysis/result-types.ts';
import type { ConfidenceInterval } from '../../estimability.ts';
import type { Measure } from '../../protocol/protocol.ts';
import { RATIO_DECIMALS } from '../comparison-text.ts';
import { columnFigure } from '../figures.ts';
import { html, type Markup } from '../html.ts';
import {
  countText,
  intervalText,
  numberText,
  percentText,
  pValuePhrase,
  signedIntervalText,
  signedText,
} from '../number-text.ts';
import {
  cellSummaryText,
  labelWithUnit,
  type MeasureOnPage,
  type PageContext,
  reasonCell,
  responseDecimals,
  responseLabel,
  responseUnit,
  standingTag,
  whyNot,
} from '../page-context.ts';
import { columns, heatTable, table } from '../table.ts';
import { fTestText } from './omnibus.ts';

/** What order did to every measure. */
export function orderSection(context: PageContext): Markup {
  return html`<p>Effects of period, adjusted for condition, from one least-squares fit of
participant, condition
and period. They are always estimated and shown; whether they are significant switches nothing.
Effects
of the previous condition (carryover) are not estimated here.</p>
${context.measures.map((entry) => measurePart(entry, context))}`;
}

function measurePart({ measure, result }: MeasureOnPage, context: PageContext): Markup {
  const { order, descriptives } = result;
  const approximation = order.approximation
    ? ' For this scale least squares is an approximation, good enough to see order.'
    : '';
  return html`<h3>${labelWithUnit(measure)} ${standingTag(order.standing)}</h3>
${countsTable({ measure, result }, context)}
${
  order.fit.estimable
    ? fitPart(order.fit, measure, order.summary === 'mean-logarithm', {
        lead: `Response: the ${cellSummaryText(order.summary)} in a period.${approximation}`,
        level: descriptives.withinParticipantIntervals.level,
      })
    : whyNot(order.fit, 'The effect of order')
}`;
}

function countsTable({ measure, result }: MeasureOnPage, { conditionLabel }: PageContext): Markup {
  const { conditions, periods } = result.descriptives.byConditionAndPeriod.reduce(
    (found, { condition, period }) => ({
      conditions: found.conditions.add(condition),
      periods: found.periods.add(period),
    }),
    { conditions: new Set<string>(), periods: new Set<number>() },
  );
  const cells = result.descriptives.byConditionAndPeriod;
  return heatTable({
    caption: `${measure.label}: participants with a value, by condition and period`,
    corner: 'Condition',
    columnHeads: [...periods].map((period) => `Period ${period}`),
    rows: [...conditions].map((condition) => ({
      head: conditionLabel(condition),
      counts: cells
        .filter((cell) => cell.condition === condition)
        .map(({ summary }) => summary.participants),
    })),
  });
}

function fitPart(
  fit: OrderFit,
  measure: Measure,
  isLogarithm: boolean,
  text: { readonly lead: string; readonly level: number },
): Markup {
  const back = isLogarithm ? Math.exp : (value: number): number => value;
  const decimals = responseDecimals(measure);
  const means = fit.periodMeans.flatMap((entry) => (entry.estimable ? [entry] : []));
  const word = isLogarithm ? 'geometric mean' : 'mean';
  const marks = means.map(({ period, mean, interval }) => ({
    label: `Period ${period}`,
    mean: back(mean),
    lower: back(interval.lower),
    upper: back(interval.upper),
  }));
  const drawable = marks.filter(({ upper }) => Number.isFinite(upper));
  const stray = [
    ...fit.notSeparable.periods.map((period) => `period ${period}`),
    ...fit.notSeparable.conditions,
  ];
  return html`<p>${text.lead}</p>
${
  drawable.length === 0
    ? null
    : columnFigure({
        description: `Adjusted ${word} of ${measure.label} by period, with intervals.`,
        caption:
          `Adjusted ${word} by period with ${percentText(text.level)} intervals, conditions ` +
          `weighted equally; ${countText(fit.participants, 'participant')}, ` +
          `${countText(fit.observations, 'observation')}.`,
        axisLabel: responseLabel(measure),
        marks: drawable,
      })
}
${table({
  caption: `${measure.label}: adjusted ${word}s by period`,
  columns: columns(['Period'], [word === 'mean' ? 'Mean' : 'Geometric mean', 'Interval']),
  rows: fit.periodMeans.map((entry) =>
    entry.estimable
      ? [
          entry.period,
          numberText(back(entry.mean), decimals),
          intervalText(intervalBack(entry.interval, back), decimals),
        ]
      : [entry.period, '–', reasonCell(entry)],
  ),
})}
<p>All periods equal: ${fTestText(fit.periodTest)}</p>
${trendPart(fit, measure, isLogarithm)}
${
  stray.length === 0
    ? null
    : html`<p class="note">The data cannot tell these effects from the others:
${stray.join(', ')}.</p>`
}`;
}

function intervalBack(
  { level, lower, upper }: ConfidenceInterval,
  back: (value: number) => number,
): ConfidenceInterval {
  return { level, lower: back(lower), upper: back(upper) };
}

function trendPart({ linearTrend }: OrderFit, measure: Measure, isLogarithm: boolean): Markup {
  if (!linearTrend.estimable) return whyNot(linearTrend, 'The linear trend over periods');
  const { estimate, interval, pValue } = linearTrend;
  if (isLogarithm) {
    const ends = intervalText(intervalBack(interval, Math.exp), RATIO_DECIMALS);
    const factor = numberText(Math.exp(estimate), RATIO_DECIMALS);
    return html`<p>Linear trend: from each period to the next, ${measure.label} changed by a
factor of
${factor} (interval ${ends}; ${pValuePhrase(pValue)}).</p>
`;
  }
  const decimals = responseDecimals(measure) + 1;
  const unit = responseUnit(measure);
  return html`<p>Linear trend: from each period to the next, ${measure.label} changed by
${signedText(estimate, decimals)}${unit} (interval ${signedIntervalText(interval, decimals)};
${pValuePhrase(pValue)}).</p>
`;
}
