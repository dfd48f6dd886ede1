import type { Comparison, ComparisonSet, MeasureResult } from '../../analysis/result-types.ts';
import type { Measure } from '../../protocol/protocol.ts';
import {
  comparisonSentence,
  effectSizeText,
  RATIO_DECIMALS,
  statisticText,
} from '../comparison-text.ts';
import { type Content, html, type Markup } from '../html.ts';
import {
  countText,
  intervalText,
  numberText,
  percentText,
  pValueText,
  signedText,
} from '../number-text.ts';
import {
  ESTIMATES,
  labelWithUnit,
  type MeasureOnPage,
  type PageContext,
  reasonCell,
  responseDecimals,
  standingTag,
} from '../page-context.ts';
import { columns, table } from '../table.ts';
import { omnibus } from './omnibus.ts';
import { ADJUSTMENTS, METHOD_NAMES, marginsText } from './registered.ts';

const BASES: { readonly [Basis in ComparisonSet['basis']]: string } = {
  'paired-t': 'paired differences of participants who gave both conditions',
  'participant-condition-period-fit':
    'adjusted for period: one least-squares fit of participant, condition and period',
  'signed-rank':
    'signed ranks of participants who gave both conditions, estimate of Hodges and Lehmann',
};

const DIRECTIONS: { readonly [Direction in Measure['direction']]: string } = {
  'lower-is-better': '; lower is better',
  'higher-is-better': '; higher is better',
  neither: '',
};

const APPROXIMATION = ' For this scale least squares is an approximation.';

function isApproximate({ basis }: ComparisonSet, { order }: MeasureResult): boolean {
  return order.approximation && basis === 'participant-condition-period-fit';
}

/** The comparisons that the plan names as primary, measure by measure, primary measures first. */
export function primarySection(context: PageContext): Markup {
  const planned = context.measures.filter(({ result }) => result.plan !== null);
  const ordered = planned.toSorted((a, b) => rank(a) - rank(b));
  return html`<p>Each comparison stands with its estimate, interval and p-value, and with what it
does not say.
Intervals are for one comparison at a time; p-values are adjusted within a measure as registered,
not across measures or looks. Nothing here was chosen by the outcome of a test.</p>
${ordered.map((entry) => measurePart(entry, context))}`;
}

function rank({ result }: MeasureOnPage): number {
  return result.plan?.role === 'primary' ? 0 : 1;
}

function measurePart({ measure, result }: MeasureOnPage, context: PageContext): Markup {
  const { method, plan } = result;
  if (method === null || plan === null) return html``;
  const primary = method.comparisonSets.filter(({ use }) => use === 'primary');
  return html`<h3>${labelWithUnit(measure)} ${standingTag(method.standing, plan.role)}</h3>
<p>Registered method: ${METHOD_NAMES[plan.method]}${DIRECTIONS[measure.direction]}.</p>
<h4>All conditions together</h4>
${omnibus(method, context)}
<h4>Condition against condition</h4>
${primary.map(
  (set) => html`<p>${setText(set)}</p>
${set.comparisons.map((comparison) => comparisonSentence(comparison, set, measure, context))}
${comparisonTable(set, measure, context)}`,
)}`;
}

function setText({ basis, multiplicity, familySize }: ComparisonSet): string {
  const family = countText(familySize, 'comparison');
  return `Basis: ${BASES[basis]}; ${family}, p-values ${ADJUSTMENTS[multiplicity]}.`;
}

/** The comparisons that were not named as primary, for comparison with those that were. */
export function sensitivitySection(context: PageContext): Markup {
  return html`<p>The plan names one primary estimate a measure. The other stands here, so that a
reader sees
how much hangs on that choice. It is exploratory and does not replace the primary one.</p>
${context.measures.map(({ measure, result }) =>
  (result.method?.comparisonSets ?? [])
    .filter(({ use }) => use === 'sensitivity')
    .map(
      (set) => html`<h3>${labelWithUnit(measure)} ${standingTag(set.standing)}</h3>
<p>${setText(set)}${isApproximate(set, result) ? APPROXIMATION : null}</p>
${comparisonTable(set, measure, context)}`,
    ),
)}`;
}

function comparisonTable(set: ComparisonSet, measure: Measure, context: PageContext): Markup {
  const isRatio = set.comparisons.some((entry) => entry.estimable && entry.ratio !== null);
  const level = percentText(1 - set.alpha);
  const kind = isRatio ? 'Ratio' : 'Difference';
  return table({
    caption: `${measure.label}: ${ESTIMATES[set.estimate]}`,
    columns: [
      ...columns(['Comparison'], [kind, `${level} interval`, 'p', 'Adjusted p', 'Participants']),
      { heading: 'Statistic', kind: 'phrase' },
      { heading: 'Effect size', kind: 'words' },
    ],
    rows: set.comparisons.map((entry): Content[] => {
      const pair = pairText(entry, context);
      if (!entry.estimable) {
        return [pair, '–', '–', '–', '–', '–', reasonCell(entry), entry.detail];
      }
      const { estimate, interval, ratio } = entry;
      const decimals = responseDecimals(measure);
      const shown =
        ratio === null ? interval : ratio.estimable ? { ...ratio, ...ratio.interval } : ratio;
      return [
        pair,
        isRatio ? numberText(Math.exp(estimate), RATIO_DECIMALS) : signedText(estimate, decimals),
        shown.estimable ? intervalText(shown, isRatio ? RATIO_DECIMALS : decimals) : '–',
        pValueText(entry.pValue),
        pValueText(entry.adjustedPValue),
        entry.participants,
        statisticText(entry),
        effectSizeText(entry),
      ];
    }),
  });
}

function pairText({ first, second }: Comparison, { conditionLabel }: PageContext): string {
  return `${conditionLabel(first)} – ${conditionLabel(second)}`;
}

/** Two one-sided tests, where the plan has a margin. */
export function equivalenceSection(context: PageContext): Markup {
  const claimed = context.measures.filter(
    ({ result }) => (result.plan?.equivalence ?? null) !== null,
  );
  if (claimed.length === 0) {
    return html`<p>The plan claims no equivalence. A difference that was not found is not one
that was excluded.</p>`;
  }
  return html`<p>Equivalence is shown where the interval, at twice the registered alpha, lies
within margins fixed
beforehand. These p-values are not adjusted for the number of comparisons.</p>
${claimed.map(({ measure, result }) =>
  (result.method?.comparisonSets ?? []).map((set) => equivalenceTable(set, measure, context)),
)}`;
}

function equivalenceTable(set: ComparisonSet, measure: Measure, context: PageContext): Markup {
  const decimals = measure.scale === 'time-like' ? RATIO_DECIMALS : responseDecimals(measure);
  return html`<h3>${labelWithUnit(measure)} ${standingTag(set.standing, set.use)}</h3>
${table({
  caption: `${measure.label}: two one-sided tests, ${ESTIMATES[set.estimate]}`,
  columns: [
    ...columns(
      ['Comparison'],
      ['Margins', `${percentText(1 - 2 * set.alpha)} interval`, 'p above lower', 'p below upper'],
    ),
    ...columns(['Outcome'], []),
  ],
  rows: set.comparisons.flatMap((entry): Content[][] => {
    const pair = pairText(entry, context);
    if (!entry.estimable) return [[pair, '–', '–', '–', '–', reasonCell(entry)]];
    const { equivalence } = entry;
    if (equivalence === null) return [];
    if (!equivalence.estimable) {
      return [[pair, '–', '–', '–', '–', reasonCell(equivalence)]];
    }
    const { lowerMargin, upperMargin, interval, lowerTest, upperTest, equivalent } = equivalence;
    return [
      [
        pair,
        marginsText({ lower: lowerMargin, upper: upperMargin }),
        intervalText(interval, decimals),
        pValueText(lowerTest.pValue),
        pValueText(upperTest.pValue),
        equivalent ? 'equivalent within the margins' : 'equivalence not shown',
      ],
    ];
  }),
})}`;
}
