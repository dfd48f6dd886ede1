import type { MissingCounts } from '../../analysis/missing-data.ts';
import { type Content, html, type Markup } from '../html.ts';
import { labelWithUnit, type PageContext } from '../page-context.ts';
import { columns, table } from '../table.ts';

/** Values expected and values there, by measure, condition and period. */
export function missingSection(context: PageContext): Markup {
  return html`<p>Expected are the values of everybody who arrived, in every period of the
sequence, by the condition
assigned. Nothing was imputed: missing values are simply not there, which is harmless only as far as
their absence has nothing to do with what they would have been.</p>
${table({
  caption: 'Expected and present values by measure',
  columns: heads(['Measure']),
  rows: context.measures.map(({ measure, result }) => [
    labelWithUnit(measure),
    ...cells(result.missing.overall),
  ]),
})}
${context.measures.map(({ measure, result }) =>
  table({
    caption: `${labelWithUnit(measure)} by condition and period`,
    columns: heads(['Condition and period']),
    rows: result.missing.byConditionAndPeriod.map(({ condition, period, counts }) => [
      `${context.conditionLabel(condition)}, period ${period}`,
      ...cells(counts),
    ]),
  }),
)}`;
}

function heads(words: readonly string[]): ReturnType<typeof columns> {
  return [
    ...columns(words, [
      'Expected',
      'Present',
      'Excluded',
      'After withdrawal',
      'Erased',
      'Not recorded',
    ]),
    ...columns(['Missing with a reason'], []),
  ];
}

function cells(counts: MissingCounts): Content[] {
  const reasons = counts.withReason.map(({ reasonCode, values }) => `${reasonCode}: ${values}`);
  return [
    counts.expected,
    counts.present,
    counts.excluded,
    counts.afterWithdrawal,
    counts.erased,
    counts.notRecorded,
    reasons.length === 0 ? '–' : reasons.join('; '),
  ];
}
