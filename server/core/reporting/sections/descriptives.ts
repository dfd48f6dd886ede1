import type { Summary } from '../../analysis/descriptive-types.ts';
import type { Measure } from '../../protocol/protocol.ts';
import { rowFigure } from '../figures.ts';
import { type Content, html, type Markup } from '../html.ts';
import { countText, intervalText, numberText, percentText } from '../number-text.ts';
import {
  cellSummaryText,
  derivedDecimals,
  labelWithUnit,
  type MeasureOnPage,
  type PageContext,
  responseLabel,
  whyNot,
} from '../page-context.ts';
import { columns, table } from '../table.ts';

/** Descriptive tables of every measure. */
export function descriptivesSection(context: PageContext): Markup {
  return html`<p>All values that the rules left in; trials are counted as they came, so participants
with more trials weigh more here. Quartiles by definition 7 of Hyndman and Fan; standard deviation
over all trials, with n − 1.</p>
${context.measures.map((entry) => measureTables(entry, context))}`;
}

function measureTables({ measure, result }: MeasureOnPage, context: PageContext): Markup {
  const { descriptives } = result;
  const name = labelWithUnit(measure);
  const rows = (head: string, summaries: readonly (readonly [string, Summary])[]): Markup =>
    summaryTable(`${name} by ${head}`, head, summaries, measure);
  return html`<h3>${name}</h3>
${intervalFigure({ measure, result }, context)}
${rows(
  'condition',
  descriptives.byCondition.map((entry) => [context.conditionLabel(entry.condition), entry.summary]),
)}
${rows(
  'period',
  descriptives.byPeriod.map((entry) => [`Period ${entry.period}`, entry.summary]),
)}
${rows(
  'condition and period',
  descriptives.byConditionAndPeriod.map((entry) => [
    `${context.conditionLabel(entry.condition)}, period ${entry.period}`,
    entry.summary,
  ]),
)}
${rows(
  'site and condition',
  descriptives.bySiteAndCondition.map((entry) => [
    `${context.siteLabel(entry.siteId)}, ${context.conditionLabel(entry.condition)}`,
    entry.summary,
  ]),
)}`;
}

function intervalFigure({ measure, result }: MeasureOnPage, context: PageContext): Markup {
  const { cellSummary, level, intervals } = result.descriptives.withinParticipantIntervals;
  if (!intervals.estimable) return whyNot(intervals, 'Intervals of the condition means');
  const centre = cellSummary === 'mean-logarithm' ? 'Geometric mean' : 'Mean';
  return rowFigure({
    description: `${centre} of ${measure.label} by condition, with within-participant intervals.`,
    caption:
      `${centre} by condition with ${percentText(level)} within-participant intervals ` +
      `(Morey 2008), of the ${cellSummaryText(cellSummary)} of each participant; ` +
      `${countText(intervals.participants, 'participant')} gave every condition. They show the ` +
      'pattern of the conditions; they are not intervals of a difference.',
    axisLabel: responseLabel(measure),
    marks: intervals.conditions.map(({ condition, mean, interval }) => ({
      label: context.conditionLabel(condition),
      mean,
      lower: interval.lower,
      upper: interval.upper,
    })),
  });
}

function summaryTable(
  caption: string,
  head: string,
  summaries: readonly (readonly [string, Summary])[],
  measure: Measure,
): Markup {
  const heading = `${head.charAt(0).toUpperCase()}${head.slice(1)}`;
  const scaleHeads = headsOfScale(measure);
  const common = measure.scale === 'binary' ? [] : DISTRIBUTION_HEADS;
  const rows = summaries.map(([label, summary]): Content[] => [
    label,
    summary.participants,
    summary.trials,
    ...(measure.scale === 'binary' ? [] : distributionCells(summary, measure)),
    ...cellsOfScale(summary, measure),
  ]);
  return table({
    caption,
    columns: columns([heading], ['Participants', 'Trials', ...common, ...scaleHeads]),
    rows,
  });
}

const DISTRIBUTION_HEADS = [
  'Mean',
  'SD',
  'Min',
  'Lower quartile',
  'Median',
  'Upper quartile',
  'Max',
];

function distributionCells({ distribution }: Summary, measure: Measure): string[] {
  if (!distribution.estimable) return DISTRIBUTION_HEADS.map(() => '–');
  const derived = derivedDecimals(measure);
  const { mean, standardDeviation, minimum, maximum } = distribution;
  return [
    numberText(mean, derived),
    standardDeviation === null ? '–' : numberText(standardDeviation, derived),
    numberText(minimum, measure.decimals),
    numberText(distribution.lowerQuartile, derived),
    numberText(distribution.median, derived),
    numberText(distribution.upperQuartile, derived),
    numberText(maximum, measure.decimals),
  ];
}

function headsOfScale(measure: Measure): string[] {
  switch (measure.scale) {
    case 'continuous':
      return [];
    case 'time-like':
      return ['Geometric mean'];
    case 'count':
      return ['Total', 'Exposure', 'Rate'];
    case 'binary':
      return ['Yes', 'Share of yes', 'Wilson interval'];
    case 'ordinal':
      return (measure.points ?? []).map(({ value, label }) => `${value} ${label}`);
  }
}

function cellsOfScale({ ofScale }: Summary, measure: Measure): string[] {
  switch (ofScale.scale) {
    case 'continuous':
      return [];
    case 'time-like': {
      const { geometricMean } = ofScale;
      return [
        geometricMean.estimable ? numberText(geometricMean.mean, derivedDecimals(measure)) : '–',
      ];
    }
    case 'count': {
      const { rate } = ofScale;
      if (!rate.estimable) return ['–', '–', '–'];
      return [
        numberText(rate.total, measure.decimals),
        `${Number(rate.exposure.toPrecision(8))} ${rate.exposureUnit ?? 'trials'}`,
        numberText(rate.rate, derivedDecimals(measure) + 3),
      ];
    }
    case 'binary': {
      const { proportion } = ofScale;
      if (!proportion.estimable) return ['–', '–', '–'];
      return [
        String(proportion.successes),
        numberText(proportion.proportion, 3),
        intervalText(proportion.interval, 3),
      ];
    }
    case 'ordinal':
      return ofScale.points.map(({ trials }) => String(trials));
  }
}
