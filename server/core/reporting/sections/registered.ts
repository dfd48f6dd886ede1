import type { ExclusionRule, Measure, MeasurePlan, Protocol } from '../../protocol/protocol.ts';
import { html, type Markup } from '../html.ts';
import { countText, percentText } from '../number-text.ts';
import { ESTIMATES, labelWithUnit, type PageContext } from '../page-context.ts';
import { policyText } from '../policy-text.ts';
import { schemeText } from '../scheme-text.ts';
import { columns, table } from '../table.ts';

/** What was fixed before the data: the protocol and its hash. */
export function registeredSection(context: PageContext): Markup {
  const { protocol } = context.body;
  const { document } = protocol;
  return html`<p>The protocol was registered before the data. Its hash is over the whole document,
so that any later change to it would show.</p>
<dl>
<dt>Version</dt><dd>${protocol.version}</dd>
<dt>SHA-256 of the protocol</dt><dd><code>${protocol.sha256}</code></dd>
<dt>Rationale</dt><dd>${document.rationale}</dd>
<dt>Scheme</dt><dd>${schemeText(document)}</dd>
<dt>Periods</dt><dd>${document.periods.count}, of
${countText(document.periods.repetitions, 'trial')} each</dd>
<dt>Hand-out</dt><dd>${policyText(document.policy)}; ${REPLACEMENTS[document.replacement.kind]}</dd>
</dl>
<h3>Hypotheses</h3>
${hypotheses(document)}
<h3>Factors, measures and plan</h3>
${factorTable(document)}
${planTable(context)}
`;
}

function hypotheses({ hypotheses: registered }: Protocol): Markup {
  if (registered.length === 0) return html`<p class="none">None registered.</p>`;
  return html`<ul>${registered.map(({ statement }) => html`<li>${statement}</li>\n`)}</ul>`;
}

const REPLACEMENTS: { readonly [Kind in Protocol['replacement']['kind']]: string } = {
  'same-site': 'a vacated slot goes to the next arrival of the same site and stratum',
  none: 'a vacated slot goes to nobody',
};

const DIRECTIONS = {
  'lower-is-better': 'lower is better',
  'higher-is-better': 'higher is better',
  neither: 'neither',
} as const;

function factorTable({ withinFactors, betweenFactors }: Protocol): Markup {
  const row = (kind: string) => (factor: Protocol['withinFactors'][number]) => [
    factor.label,
    kind,
    factor.levels.map(({ label }) => label).join(' · '),
  ];
  return table({
    caption: 'Factors',
    columns: columns(['Factor', 'Kind', 'Levels'], []),
    rows: [
      ...withinFactors.map(row('within participants')),
      ...betweenFactors.map(row('between participants')),
    ],
  });
}

function planTable(context: PageContext): Markup {
  return table({
    caption: 'Measures and their registered analysis',
    columns: columns(
      ['Measure', 'Scale', 'Better', 'Role', 'Method', 'Primary estimate', 'Contrasts', 'Alpha'],
      [],
    ),
    rows: context.measures.map(({ measure, result: { plan } }) => [
      labelWithUnit(measure),
      measure.scale,
      DIRECTIONS[measure.direction],
      ...(plan === null
        ? ['no plan (exposure of another measure)', '–', '–', '–', '–']
        : planCells(plan, measure, context)),
    ]),
  });
}

function planCells(plan: MeasurePlan, measure: Measure, context: PageContext): string[] {
  const { contrasts, multiplicity, equivalence } = plan;
  const unit = measure.scale === 'time-like' || measure.unit === null ? '' : ` ${measure.unit}`;
  const pairs =
    contrasts.kind === 'all-pairs'
      ? 'all pairs'
      : `each against ${context.conditionLabel(contrasts.reference)}`;
  const margins =
    equivalence === null ? '' : `; equivalence within ${marginsText(equivalence)}${unit}`;
  return [
    plan.role,
    METHOD_NAMES[plan.method],
    ESTIMATES[plan.primaryEstimate],
    `${pairs}, p-values ${ADJUSTMENTS[multiplicity]}${margins}`,
    percentText(plan.alpha),
  ];
}

/** Margins as the protocol has them, with a true minus sign. */
export function marginsText(margins: { readonly lower: number; readonly upper: number }): string {
  return `${margins.lower} to ${margins.upper}`.replaceAll('-', '−');
}

/** Names of methods in running text. */
export const METHOD_NAMES: { readonly [Method in MeasurePlan['method']]: string } = {
  'repeated-measures-anova': 'repeated-measures analysis of variance',
  friedman: 'Friedman’s rank test',
};

/** How p-values were adjusted, in running text. */
export const ADJUSTMENTS: { readonly [Key in MeasurePlan['multiplicity']]: string } = {
  holm: 'adjusted by Holm’s method',
  bonferroni: 'adjusted by Bonferroni’s method',
  none: 'not adjusted for their number',
};

/** An exclusion rule in words. */
export function ruleText(rule: ExclusionRule, context: PageContext): string {
  if (rule.kind === 'incomplete-participant') {
    return `Participants with fewer than ${rule.minimumPeriods} completed periods`;
  }
  const measure = context.measureLabel(rule.measure);
  if (rule.kind === 'time-out') return `${measure}: values at or above ${rule.limit}`;
  const ends = [
    ...(rule.minimum === null ? [] : [`below ${rule.minimum}`]),
    ...(rule.maximum === null ? [] : [`above ${rule.maximum}`]),
  ];
  return `${measure}: values ${ends.join(' or ')}`;
}
