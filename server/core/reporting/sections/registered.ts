import type { ExclusionRule, MeasurePlan, Protocol } from '../../protocol/protocol.ts';
import { html, type Markup } from '../html.ts';
import { percentText } from '../number-text.ts';
import { labelWithUnit, type PageContext } from '../page-context.ts';
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
<dt>Scheme</dt><dd>${SCHEMES[document.scheme.kind]}, ${document.periods.count} periods of ${document.periods.repetitions} each</dd>
<dt>Hand-out</dt><dd>${document.policy.kind}; a vacated slot goes to ${document.replacement.kind === 'none' ? 'nobody' : 'the next arrival of the same site and stratum'}</dd>
</dl>
<h3>Hypotheses</h3>
${document.hypotheses.length === 0 ? html`<p class="none">None registered.</p>` : html`<ul>${document.hypotheses.map(({ statement }) => html`<li>${statement}</li>`)}</ul>`}
<h3>Factors, measures and plan</h3>
${factorTable(document)}
${planTable(context)}
`;
}

const SCHEMES: { readonly [Kind in Protocol['scheme']['kind']]: string } = {
  'complete-permutations': 'complete permutations',
  'cyclic-latin-square': 'cyclic Latin square',
  williams: 'Williams design',
  'custom-list': 'a list of sequences given in the protocol',
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
        : planCells(plan, context)),
    ]),
  });
}

function planCells(plan: MeasurePlan, context: PageContext): string[] {
  const { contrasts, multiplicity, equivalence } = plan;
  const pairs =
    contrasts.kind === 'all-pairs'
      ? 'all pairs'
      : `each against ${context.conditionLabel(contrasts.reference)}`;
  const margins =
    equivalence === null ? '' : `; equivalence within ${equivalence.lower} to ${equivalence.upper}`;
  return [
    plan.role,
    METHOD_NAMES[plan.method],
    plan.primaryEstimate === 'unadjusted' ? 'not adjusted for period' : 'adjusted for period',
    `${pairs}, p-values ${ADJUSTMENTS[multiplicity]}${margins}`,
    percentText(plan.alpha),
  ];
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
