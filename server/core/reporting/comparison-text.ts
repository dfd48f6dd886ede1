import type { Comparison, ComparisonEstimate, ComparisonSet } from '../analysis/result-types.ts';
import type { Measure } from '../protocol/protocol.ts';
import { html, type Markup } from './html.ts';
import {
  intervalText,
  numberText,
  percentText,
  pValuePhrase,
  signedIntervalText,
  signedText,
} from './number-text.ts';
import { type PageContext, responseDecimals, responseUnit } from './page-context.ts';

/** Decimals of a ratio of geometric means. */
export const RATIO_DECIMALS = 3;

/**
 * One comparison in plain language: estimate, interval, adjusted p, and what it does not say.
 */
export function comparisonSentence(
  comparison: Comparison,
  set: ComparisonSet,
  measure: Measure,
  context: PageContext,
): Markup {
  const first = context.conditionLabel(comparison.first);
  const second = context.conditionLabel(comparison.second);
  if (!comparison.estimable) {
    return html`<div class="finding">
<p><strong>${first} compared with ${second}</strong> could not be
estimated: ${comparison.detail} <code>${comparison.reason}</code></p></div>
`;
  }
  const adjusted = set.multiplicity === 'none' ? 'not adjusted' : 'adjusted';
  return html`<div class="finding"><p><strong>${first} compared with ${second}.</strong>
${estimateText(comparison, measure, first, second)}; ${adjusted}
${pValuePhrase(comparison.adjustedPValue)}.</p>
<p>${whatItDoesNotSay(comparison, set)}</p></div>
`;
}

function estimateText(
  comparison: ComparisonEstimate,
  measure: Measure,
  first: string,
  second: string,
): string {
  const { estimate, interval, ratio } = comparison;
  const level = interval.estimable ? percentText(interval.level) : '';
  if (ratio !== null) {
    const value = Math.exp(estimate);
    const ends = ratio.estimable
      ? `${level} interval ${intervalText(ratio.interval, RATIO_DECIMALS)}`
      : `no interval: ${ratio.detail}`;
    const change = percentText(Math.abs(value - 1));
    const direction = value >= 1 ? 'above' : 'below';
    const times = numberText(value, RATIO_DECIMALS);
    return (
      `${measure.label} under ${first} was estimated at ${times} times that under ${second}, ` +
      `${change} ${direction} it (${ends})`
    );
  }
  const decimals = responseDecimals(measure);
  const unit = responseUnit(measure);
  const ends = interval.estimable
    ? `${level} interval of the difference ${signedIntervalText(interval, decimals)}${unit}`
    : `no interval: ${interval.detail}`;
  const subject = measure.scale === 'binary' ? `Share of yes in ${measure.label}` : measure.label;
  const size = numberText(Math.abs(estimate), decimals);
  if (!/[1-9]/.test(size)) {
    return `${subject} was estimated the same under both, to the decimals shown (${ends})`;
  }
  const direction = estimate > 0 ? 'higher' : 'lower';
  return (
    `${subject} was estimated ${size}${unit} ${direction} under ${first} ` +
    `than under ${second} (${ends})`
  );
}

function whatItDoesNotSay(comparison: ComparisonEstimate, { alpha }: ComparisonSet): string {
  if (comparison.adjustedPValue <= alpha) {
    return (
      `At the registered level of ${percentText(alpha)} the data speak against there being no ` +
      'difference. That does not say that the difference is large enough to matter: judge that ' +
      'by the interval.'
    );
  }
  return (
    'The data do not settle whether there is a difference. That does not say that the two ' +
    'conditions are alike: every value in the interval is compatible with the data.'
  );
}

/** The effect size in the trade's usual form, with its interval where it has one. */
export function effectSizeText({ effectSizes }: ComparisonEstimate): Markup {
  switch (effectSizes.kind) {
    case 'standardised-difference': {
      const { dz, dav } = effectSizes;
      const average = dav.estimable ? html`; d<sub>av</sub> ${signedText(dav.estimate, 2)}` : null;
      const range = intervalText(dz.interval, 2);
      return html`d<sub>z</sub> ${signedText(dz.estimate, 2)} (${range})${average}`;
    }
    case 'fit-standardised-difference': {
      const { estimate, interval } = effectSizes.d;
      return html`d ${signedText(estimate, 2)} (${intervalText(interval, 2)})`;
    }
    case 'rank-biserial':
      return html`rank-biserial ${signedText(effectSizes.rankBiserial, 2)}`;
  }
}

/** Statistic with degrees of freedom, or rank sums. */
export function statisticText({ statistic }: ComparisonEstimate): string {
  if (statistic.kind === 't') {
    const { value, degreesOfFreedom } = statistic;
    return `t(${numberText(degreesOfFreedom, 0)}) = ${numberText(value, 2)}`;
  }
  const { positiveRankSum, negativeRankSum, method } = statistic;
  const how = method === 'exact' ? 'exact' : 'normal approximation';
  return `rank sums ${positiveRankSum} and ${negativeRankSum} (${how})`;
}
