import { html, type Markup } from '../html.ts';
import type { PageContext } from '../page-context.ts';
import { columns, table } from '../table.ts';

/** How often values were joined with conditions before this report. */
export function looksSection({ body }: PageContext): Markup {
  const early = body.looks
    .filter(({ duringEnrolment }) => duringEnrolment)
    .reduce((sum, { count }) => sum + count, 0);
  const stateText =
    body.snapshot.enrolment === 'closed'
      ? 'Enrolment was closed when the snapshot was frozen.'
      : 'Enrolment had not ended when the snapshot was frozen: this analysis is itself a look, ' +
        'and stopping or going on because of it would make the error rates wrong.';
  return html`<p>${stateText} Before enrolment ended, measured values were joined with conditions
${early === 0 ? 'not once' : early === 1 ? 'once' : `${early} times`}. No p-value is corrected for
looks.</p>
${table({
  caption: 'Looks up to and including this analysis',
  columns: [...columns(['Kind', 'When'], ['Looks'])],
  rows: body.looks.map(({ kind, duringEnrolment, count }) => [
    kind,
    duringEnrolment ? 'before enrolment ended' : 'after enrolment ended',
    count,
  ]),
})}`;
}

/** How anybody can get the same bytes again. */
export function recomputeSection({ body }: PageContext, bodySha256: string): Markup {
  return html`<p>The report is a function of the four things below: the same four give the same
bytes. The service
recomputes it on request and says whether they are the same. Once a participant has been erased, the
snapshot can no longer be put together; the report and its hashes stay.</p>
<dl>
<dt>Protocol, SHA-256</dt><dd><code>${body.protocol.sha256}</code></dd>
<dt>Snapshot, SHA-256</dt><dd><code>${body.snapshot.sha256}</code></dd>
<dt>Engine</dt><dd>${body.engineVersion}</dd>
<dt>Seed</dt><dd><code>${body.seed}</code></dd>
<dt>Report body, SHA-256</dt><dd><code>${bodySha256}</code></dd>
</dl>
<p>The body is canonical JSON (RFC 8785). Number, time and requester of the report are not part
of it.</p>
`;
}

/** What a reader must not forget. */
export function cautionsSection(): Markup {
  return html`<ul>
<li>Ethics approval and informed consent are the duty of the labs that test; this report does not
vouch for either.</li>
<li>Use in regulated or medical work needs the organisation’s own validation and a qualified
statistician.</li>
<li>Local rules come first.</li>
<li>Confirmatory is what the registered plan foresaw; what is labelled exploratory can suggest,
not confirm.</li>
<li>Tables over few participants can reveal single values. Think of that before passing the
report on.</li>
<li>Results hold for these conditions, tasks and participants; carrying them further is a
judgement, not a result.</li>
</ul>
`;
}

/** Published sources of the methods. */
export function sourcesSection({ body }: PageContext): Markup {
  const items = body.sources.map(({ topic, citation }) => html`<li>${topic}: ${citation}.</li>\n`);
  return html`<ul>${items}</ul>
`;
}
