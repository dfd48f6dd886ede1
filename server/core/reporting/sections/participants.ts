import type { FlowCounts } from '../../analysis/participant-flow.ts';
import { html, type Markup } from '../html.ts';
import { countText } from '../number-text.ts';
import type { PageContext } from '../page-context.ts';
import { columns, table } from '../table.ts';
import { ruleText } from './registered.ts';

const FLOW_ROWS: readonly (readonly [string, (counts: FlowCounts) => number])[] = [
  ['Arrived', ({ arrived }) => arrived],
  ['Completed every period', ({ completed }) => completed],
  ['Under way at freezing', ({ underWay }) => underWay],
  ['Withdrawn', ({ withdrawn }) => withdrawn],
  ['Withdrawn and replaced', ({ replaced }) => replaced],
  ['Excluded by a registered rule', ({ excluded }) => excluded],
  ['Erased before freezing', ({ erased }) => erased],
  ['Check-ins voided as mistakes (not among the arrived)', ({ voided }) => voided],
];

/** Who came, how far they got, and what differed from the protocol. */
export function participantsSection(context: PageContext): Markup {
  const { overall, bySite, byProtocolVersion, outsideProtocol } =
    context.body.result.participantFlow;
  const versions = byProtocolVersion.map(
    ({ version, arrived }) =>
      `under protocol version ${version}: ${countText(arrived, 'participant')}`,
  );
  return html`<p>${countText(overall.arrived, 'participant')} arrived at
${countText(bySite.length, 'site')} (${versions.length === 0 ? 'none' : versions.join(', ')}).</p>
${table({
  caption: 'Participant flow by site',
  columns: columns([''], [...bySite.map(({ label }) => label), 'All sites']),
  rows: [
    ['Planned', ...bySite.map(({ targetEnrolment }) => targetEnrolment), planned(context)],
    ...FLOW_ROWS.map(([label, count]) => [
      label,
      ...bySite.map(({ counts }) => count(counts)),
      count(overall),
    ]),
  ],
})}
${table({
  caption: 'Withdrawals by coded reason and period reached',
  columns: columns(['Reason'], ['Period reached', 'Participants']),
  rows: overall.withdrawals.map(({ reasonCode, periodReached, participants }) => [
    reasonCode,
    periodReached,
    participants,
  ]),
})}
${table({
  caption: 'Protocol deviations, kept and flagged',
  columns: columns(['Kind'], ['Occurrences', 'Participants']),
  rows: overall.deviations.map(({ kind, occurrences, participants }) => [
    kind.replaceAll('-', ' '),
    occurrences,
    participants,
  ]),
})}
<p class="note">Trials are analysed under the condition that was presented. An occurrence is a trial
where the condition differed from the one assigned, and a period for every other kind.</p>
${
  outsideProtocol.trials === 0
    ? null
    : html`<p class="note">${countText(outsideProtocol.trials, 'trial')} of other protocol versions
have a condition, period or stratum that this version does not know, and are in no table below.</p>`
}`;
}

function planned({ body }: PageContext): number {
  return body.snapshot.sites.reduce((sum, { targetEnrolment }) => sum + targetEnrolment, 0);
}

function identifiers(ids: readonly string[]): Markup[] {
  return ids.map((id, index) => html`${index === 0 ? '' : ', '}<code>${id}</code>`);
}

/** What the registered rules left out. */
export function exclusionsSection(context: PageContext): Markup {
  const { rules, values, participants } = context.body.result.exclusions;
  if (rules.length === 0) {
    return html`<p>The protocol registers no exclusion rule, and nothing was left out.</p>`;
  }
  const named = rules.flatMap(({ excludedParticipants }) => excludedParticipants);
  return html`<p>The registered rules were applied in their order, before anything was estimated.
They left
out ${countText(values, 'value')};
${countText(participants, 'participant was', 'participants were')} left out entirely. Nothing
else was left out.</p>
${table({
  caption: 'Left out by rule',
  columns: columns(['Rule', 'By measure', 'By site'], ['Values', 'Participants']),
  rows: rules.map((account) => [
    ruleText(account.rule, context),
    account.byMeasure
      .map((entry) => `${context.measureLabel(entry.measure)}: ${entry.values}`)
      .join('; ') || '–',
    account.bySite
      .map((entry) => `${context.siteLabel(entry.siteId)}: ${entry.values}`)
      .join('; ') || '–',
    account.values,
    account.excludedParticipants.length,
  ]),
})}
${
  named.length === 0
    ? null
    : html`<p class="note">Participants left out, by identifier: ${identifiers(named)}. The
values left out
are listed by participant, period and repetition in the report’s JSON.</p>`
}`;
}
