import type { CellSummary, MeasureResult, Standing } from '../analysis/result-types.ts';
import type { NotEstimable } from '../estimability.ts';
import { conditionsOf, type Measure } from '../protocol/protocol.ts';
import { html, type Markup } from './html.ts';
import type { ReportBody } from './report-body.ts';

/** A report's body with the words for its keys at hand. */
export interface PageContext {
  readonly body: ReportBody;
  readonly conditionLabel: (key: string) => string;
  readonly siteLabel: (siteId: string) => string;
  readonly measureLabel: (key: string) => string;
  readonly factorLabel: (key: string) => string;
  /** Measures with their results, in the protocol's order. */
  readonly measures: readonly MeasureOnPage[];
}

export interface MeasureOnPage {
  readonly measure: Measure;
  readonly result: MeasureResult;
}

/** Builds the look-ups; an unknown key stands for itself. */
export function pageContext(body: ReportBody): PageContext {
  const { document } = body.protocol;
  const factors = [...document.withinFactors, ...document.betweenFactors];
  return {
    body,
    conditionLabel: labels(conditionsOf(document.withinFactors)),
    siteLabel: labels(body.snapshot.sites.map(({ siteId, label }) => ({ key: siteId, label }))),
    measureLabel: labels(document.measures),
    factorLabel: labels(factors),
    measures: document.measures.flatMap((measure) => {
      const result = body.result.measures.find((entry) => entry.measure === measure.key);
      return result === undefined ? [] : [{ measure, result }];
    }),
  };
}

function labels(of: readonly { key: string; label: string }[]): (key: string) => string {
  const byKey = new Map(of.map(({ key, label }) => [key, label]));
  return (key) => byKey.get(key) ?? key;
}

/** Decimals of means, differences and quantiles: one more than the values themselves have. */
export function derivedDecimals({ decimals, scale }: Measure): number {
  return scale === 'binary' ? 3 : decimals + 1;
}

/**
 * Decimals of what is compared: as {@link derivedDecimals}, but a rate over a measured exposure,
 * which is small where the exposure is large, has three more.
 */
export function responseDecimals(measure: Measure): number {
  return derivedDecimals(measure) + (measure.exposure?.kind === 'measure' ? 3 : 0);
}

/** The unit of what is compared, after a space; nothing when it has none. */
export function responseUnit({ unit, exposure }: Measure): string {
  if (exposure?.kind === 'measure') return ' per unit of exposure';
  return unit === null ? '' : ` ${unit}`;
}

/** `Pegboard time (s)`. */
export function labelWithUnit({ label, unit }: Measure): string {
  return unit === null ? label : `${label} (${unit})`;
}

/** What an axis of cell summaries shows, with its unit. */
export function responseLabel(measure: Measure): string {
  if (measure.scale === 'binary') return `${measure.label}, share of yes`;
  if (measure.exposure?.kind === 'measure') return `${measure.label}${responseUnit(measure)}`;
  return labelWithUnit(measure);
}

/** What one number of a participant and condition is, in words. */
export function cellSummaryText(summary: CellSummary): string {
  switch (summary) {
    case 'mean':
      return 'mean of the values';
    case 'mean-logarithm':
      return 'mean of the logarithms of the values';
    case 'rate':
      return 'total count over total exposure';
    case 'proportion':
      return 'share of yes';
    case 'median':
      return 'median of the values';
  }
}

/** The two estimates that stand side by side, in words. */
export const ESTIMATES = {
  'adjusted-for-period': 'adjusted for period',
  unadjusted: 'not adjusted for period',
} as const;

/** A reason code in a table's cell. */
export function reasonCell({ reason }: NotEstimable): Markup {
  return html`<code>${reason}</code>`;
}

/** The word that says whether the registered plan foresaw a result. */
export function standingTag(standing: Standing, role: string | null = null): Markup {
  const text = role === null ? standing : `${role}, ${standing}`;
  return html`<span class="tag ${standing}">${text}</span>`;
}

/** What stands where a number cannot. */
export function whyNot({ detail, reason }: NotEstimable, what: string): Markup {
  return html`<p class="not-estimable">${what} could not be estimated: ${detail}
<code>${reason}</code></p>
`;
}
