import { html, type Markup } from './html.ts';
import { countText } from './number-text.ts';
import { type PageContext, pageContext } from './page-context.ts';
import { PAGE_STYLE } from './page-style.ts';
import type { ReportBody } from './report-body.ts';
import {
  cautionsSection,
  looksSection,
  recomputeSection,
  sourcesSection,
} from './sections/closing.ts';
import { equivalenceSection, primarySection, sensitivitySection } from './sections/comparisons.ts';
import { descriptivesSection } from './sections/descriptives.ts';
import { missingSection } from './sections/missing.ts';
import { orderSection } from './sections/order.ts';
import { exclusionsSection, participantsSection } from './sections/participants.ts';
import { registeredSection } from './sections/registered.ts';

/**
 * A report as one self-contained HTML page: no script, nothing loaded, figures drawn in it.
 *
 * A function of its arguments alone. Every text of the study is escaped; the markup is also
 * well-formed XML, every element closed.
 *
 * @param bodySha256 of the canonical JSON of the body, printed for whoever recomputes it
 */
export function reportPage(body: ReportBody, bodySha256: string): string {
  const context = pageContext(body);
  const { title } = body.protocol.document;
  const sections = sectionsOf(context, bodySha256);
  const page = html`<html lang="en-GB">
<head>
<meta charset="utf-8" />
<meta name="viewport" content="width=device-width, initial-scale=1" />
<title>${title} – report</title>
<style>${{ markup: PAGE_STYLE }}</style>
</head>
<body>
<header>
<h1>${title}</h1>
<p>${summary(context)}</p>
<nav aria-label="Sections"><ol>
${sections.map(({ id, heading }) => html`<li><a href="#${id}">${heading}</a></li>\n`)}</ol></nav>
</header>
<main>
${sections.map(
  ({ id, heading, content }) => html`<section id="${id}" aria-labelledby="${id}-heading">
<h2 id="${id}-heading">${heading}</h2>
${content}</section>
`,
)}</main>
</body>
</html>
`;
  return `<!DOCTYPE html>\n${page.markup}`;
}

interface Section {
  readonly id: string;
  readonly heading: string;
  readonly content: Markup;
}

function sectionsOf(context: PageContext, bodySha256: string): Section[] {
  return [
    { id: 'registered', heading: 'What was registered', content: registeredSection(context) },
    { id: 'participants', heading: 'Who took part', content: participantsSection(context) },
    { id: 'exclusions', heading: 'What was excluded', content: exclusionsSection(context) },
    { id: 'descriptives', heading: 'What was measured', content: descriptivesSection(context) },
    { id: 'primary', heading: 'Primary results', content: primarySection(context) },
    { id: 'sensitivity', heading: 'Sensitivity', content: sensitivitySection(context) },
    { id: 'order', heading: 'Order', content: orderSection(context) },
    { id: 'missing', heading: 'Missing data', content: missingSection(context) },
    { id: 'equivalence', heading: 'Equivalence', content: equivalenceSection(context) },
    { id: 'looks', heading: 'Looks', content: looksSection(context) },
    {
      id: 'recompute',
      heading: 'How to recompute',
      content: recomputeSection(context, bodySha256),
    },
    { id: 'cautions', heading: 'Cautions', content: cautionsSection() },
    { id: 'sources', heading: 'Sources of the methods', content: sourcesSection(context) },
  ];
}

function summary({ body }: PageContext): string {
  const { document, version } = body.protocol;
  const { overall, bySite } = body.result.participantFlow;
  const conditions = document.withinFactors.reduce((count, { levels }) => count * levels.length, 1);
  return (
    `Report on protocol version ${version}: ${countText(conditions, 'condition')} over ` +
    `${countText(document.periods.count, 'period')}, ` +
    `${countText(overall.arrived, 'participant')} at ${countText(bySite.length, 'site')}, ` +
    `of whom ${overall.completed} completed every period.`
  );
}
