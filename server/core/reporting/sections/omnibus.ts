import type {
  FriedmanResult,
  LeftOut,
  MethodResult,
  RepeatedMeasuresAnovaResult,
} from '../../analysis/result-types.ts';
import type { Estimable } from '../../estimability.ts';
import type { FTest } from '../../models/period-adjusted-types.ts';
import type {
  AnovaEffect,
  AnovaTest,
  CorrectedTest,
} from '../../models/repeated-measures-types.ts';
import { type Content, html, type Markup } from '../html.ts';
import {
  countText,
  degreesOfFreedomText,
  numberText,
  pValuePhrase,
  pValueText,
} from '../number-text.ts';
import { cellSummaryText, type PageContext, reasonCell, whyNot } from '../page-context.ts';
import { columns, table } from '../table.ts';

/** The test over all conditions by the measure's planned method. */
export function omnibus(method: MethodResult, context: PageContext): Markup {
  switch (method.method) {
    case 'repeated-measures-anova':
      return anovaPart(method, context);
    case 'friedman':
      return friedmanPart(method);
  }
}

function leftOutText({ withData, complete, participants }: LeftOut): string {
  if (participants.length === 0) {
    return `All ${countText(withData, 'participant')} with data gave every condition.`;
  }
  const were = participants.length === 1 ? 'was' : 'were';
  return `This test needs every condition from everybody: it uses ${complete} of ${countText(
    withData,
    'participant',
  )} with data, and ${participants.length} ${were} left out of it for a missing condition.`;
}

function anovaPart(result: RepeatedMeasuresAnovaResult, context: PageContext): Markup {
  const { anova, leftOut, summary, conditionAdjustedForPeriod } = result;
  const beside = html`<p>All conditions equal, adjusted for period (participant + condition +
period in one fit,
every observation used): ${fTestText(conditionAdjustedForPeriod)}</p>
`;
  const intro = html`<p>Repeated-measures analysis of variance of one number a participant and
condition, the
${cellSummaryText(summary)}. ${leftOutText(leftOut)}</p>
`;
  if (!anova.estimable) {
    return html`${intro}${whyNot(anova, 'The analysis of variance')}${beside}`;
  }
  const name = ({ factors }: AnovaEffect): string => factors.map(context.factorLabel).join(' × ');
  return html`${intro}
${table({
  caption: 'Analysis of variance, with corrections for sphericity',
  columns: columns(
    ['Effect'],
    [
      'df',
      'Error df',
      'F',
      'p uncorrected',
      'GG ε',
      'p (GG)',
      'HF ε',
      'p (HF)',
      'Partial η²',
      'Generalised η²',
    ],
  ),
  rows: anova.effects.map((effect): Content[] => [
    name(effect),
    ...(effect.estimable ? effectCells(effect) : [reasonCell(effect), ...Array(9).fill('–')]),
  ]),
})}
${anova.effects.flatMap((effect) =>
  effect.estimable ? [] : [whyNot(effect, `The effect of ${name(effect)}`)],
)}
${table({
  caption: 'Mauchly’s test of sphericity',
  columns: columns(['Effect'], ['W', 'Chi-square', 'df', 'p']),
  rows: anova.effects.flatMap((effect) =>
    effect.estimable && effect.sphericity.applicable
      ? [[name(effect), ...mauchlyCells(effect.sphericity.mauchly)]]
      : [],
  ),
})}
<p class="note">The corrected tests are shown whatever Mauchly’s test says; it decides nothing. GG:
Greenhouse–Geisser, HF: Huynh–Feldt. An effect of one degree of freedom needs no correction.</p>
${beside}`;
}

function effectCells(test: AnovaTest): string[] {
  const { sphericity } = test;
  const corrected = (of: Estimable<CorrectedTest>): string[] =>
    of.estimable ? [numberText(of.epsilon, 3), pValueText(of.pValue)] : ['–', '–'];
  const none = ['–', '–', '–', '–'];
  return [
    degreesOfFreedomText(test.degreesOfFreedom),
    degreesOfFreedomText(test.errorDegreesOfFreedom),
    numberText(test.fStatistic, 2),
    pValueText(test.pValue),
    ...(sphericity.applicable
      ? [
          ...corrected({ estimable: true, ...sphericity.greenhouseGeisser }),
          ...corrected(sphericity.huynhFeldt),
        ]
      : none),
    numberText(test.partialEtaSquared, 3),
    numberText(test.generalisedEtaSquared, 3),
  ];
}

function mauchlyCells(
  mauchly: Extract<AnovaTest['sphericity'], { applicable: true }>['mauchly'],
): Content[] {
  if (!mauchly.estimable) return [reasonCell(mauchly), '–', '–', '–'];
  const { w, chiSquare, degreesOfFreedom, pValue } = mauchly;
  return [
    numberText(w, 3),
    numberText(chiSquare, 2),
    degreesOfFreedomText(degreesOfFreedom),
    pValueText(pValue),
  ];
}

/** `F(3, 24) = 22.36, p < 0.001` */
function fText(
  test: Pick<FTest, 'degreesOfFreedom' | 'errorDegreesOfFreedom' | 'fStatistic' | 'pValue'>,
): string {
  const numerator = degreesOfFreedomText(test.degreesOfFreedom);
  const denominator = degreesOfFreedomText(test.errorDegreesOfFreedom);
  const statistic = numberText(test.fStatistic, 2);
  return `F(${numerator}, ${denominator}) = ${statistic}, ${pValuePhrase(test.pValue)}`;
}

/** An F test in running text. */
export function fTestText(test: Estimable<FTest>): Markup {
  if (!test.estimable) return html`not estimable: ${test.detail} <code>${test.reason}</code>`;
  const { degreesOfFreedom, errorDegreesOfFreedom, fStatistic, pValue, partialEtaSquared } = test;
  return html`${fText({ degreesOfFreedom, errorDegreesOfFreedom, fStatistic, pValue })},
partial η² = ${numberText(partialEtaSquared, 3)}.`;
}

function friedmanPart({ friedman, leftOut, summary }: FriedmanResult): Markup {
  const intro = html`<p>Friedman’s test ranks the conditions within each participant, by the
${cellSummaryText(summary)}.
${leftOutText(leftOut)} It knows no period and no between factor.</p>
`;
  if (!friedman.estimable) return html`${intro}${whyNot(friedman, 'Friedman’s test')}`;
  const { chiSquare, degreesOfFreedom, pValue, kendallsW, imanDavenport } = friedman;
  return html`${intro}<p>Chi-square(${degreesOfFreedomText(degreesOfFreedom)})
= ${numberText(chiSquare, 2)},
${pValuePhrase(pValue)}; Kendall’s W = ${numberText(kendallsW, 3)} over
${countText(friedman.participants, 'participant')}${
  imanDavenport.estimable ? html`; as an F (Iman and Davenport), ${fText(imanDavenport)}` : null
}.</p>
`;
}
