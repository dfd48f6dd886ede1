import { describe, expect, it } from 'vitest';
import { runPlan } from '#core/analysis/run-plan.ts';
import { type Snapshot, snapshotSha256, splitSnapshot } from '#core/analysis/snapshot.ts';
import type { Protocol } from '#core/protocol/protocol.ts';
import { reportPage } from '#core/reporting/page.ts';
import { canonicalReportBody, type ReportBody, reportBody } from '#core/reporting/report-body.ts';
import { mixedProtocol, mixedValues } from '../analysis/mixed-study.ts';
import { participantOf, snapshotOf } from '../analysis/study-of-rows.ts';
import { type Tag, tagsOf } from './well-formed.ts';

const NASTY = `<script>alert("x")</script> & 'co' "`;
const gloves = ['bare', 'thin', 'thick'];

function snapshotWith(siteLabel: string): Snapshot {
  const participants = Array.from({ length: 9 }, (_, person) =>
    participantOf(
      { id: `0197-${person}`, slotNumber: person + 1, siteId: `site-${1 + (person % 2)}` },
      gloves.map((_glove, index) => {
        const condition = (person + index) % 3;
        const values = mixedValues(person, condition, index + 1);
        return { condition: gloves[condition]!, values };
      }),
    ),
  );
  const withdrawn = participantOf({
    id: '0197-w',
    slotNumber: 10,
    sequence: gloves,
    periods: [],
    ending: { kind: 'withdrawn', at: '', reasonCode: 'cold-hands', periodReached: 1 },
  });
  const snapshot = snapshotOf([...participants, withdrawn]);
  return {
    ...snapshot,
    enrolment: 'enrolling',
    looks: [{ kind: 'analysis', duringEnrolment: true, count: 2 }],
    sites: snapshot.sites.map((site) => ({ ...site, label: `${siteLabel} ${site.siteId}` })),
  };
}

function bodyOf(protocol: Protocol, snapshot: Snapshot): ReportBody {
  const { body } = splitSnapshot(snapshot, () => new Uint8Array(16));
  return reportBody({
    protocol,
    protocolVersion: 3,
    protocolSha256: 'a'.repeat(64),
    snapshotBody: body,
    snapshotSha256: snapshotSha256(body),
    engineVersion: 'engine of the test',
    seed: 'seed-of-the-test',
    result: runPlan(protocol, snapshot, { seed: 'seed-of-the-test' }),
  });
}

/** Every text that people write replaced. */
function written(text: string): Protocol {
  const protocol = mixedProtocol();
  const labelled = <Of extends { readonly label: string }>(of: Of): Of => ({ ...of, label: text });
  return {
    ...protocol,
    title: text,
    rationale: text,
    hypotheses: [{ key: 'one', statement: text }],
    withinFactors: protocol.withinFactors.map((factor) => ({
      ...labelled(factor),
      levels: factor.levels.map(labelled),
    })),
    measures: protocol.measures.map((measure) => ({
      ...labelled(measure),
      unit: text,
      points: measure.points?.map(labelled) ?? null,
    })),
  };
}

const body = bodyOf(mixedProtocol(), snapshotWith('Lab'));
const page = reportPage(body, 'c'.repeat(64));

function named(tags: readonly Tag[], name: string): Tag[] {
  return tags.filter((tag) => tag.name === name);
}

describe('reportPage', () => {
  it('is well-formed markup', () => {
    expect(named(tagsOf(page), 'table').length).toBeGreaterThan(20);
  });

  it('carries every written text escaped: the tags are those of a page with plain words', () => {
    const names = (text: string) =>
      tagsOf(reportPage(bodyOf(written(text), snapshotWith(text)), 'c'.repeat(64)))
        .map(({ name, attributes }) => `${name} ${[...attributes.keys()].join(' ')}`)
        .join('\n');
    const nasty = reportPage(bodyOf(written(NASTY), snapshotWith(NASTY)), 'c'.repeat(64));
    expect(nasty).not.toContain('<script');
    expect(nasty).toContain('&lt;script&gt;alert(&quot;x&quot;)');
    expect(names(NASTY)).toBe(names('plain words'));
  });

  it('loads nothing and runs nothing', () => {
    const tags = tagsOf(page);
    for (const name of ['script', 'link', 'img', 'iframe', 'object', 'form']) {
      expect(named(tags, name)).toEqual([]);
    }
    for (const { attributes } of tags) {
      for (const [name, value] of attributes) {
        expect(name).not.toMatch(/^(?:on|src|style)/);
        if (name === 'href') expect(value).toMatch(/^#/);
      }
    }
    expect(page).not.toMatch(/url\(|@import/);
  });

  it('can be found one’s way in: language, one main heading, levels without a gap', () => {
    const tags = tagsOf(page);
    expect(named(tags, 'html')[0]?.attributes.get('lang')).toBe('en-GB');
    const levels = tags
      .filter(({ name }) => /^h[1-6]$/.test(name))
      .map(({ name }) => Number(name.slice(1)));
    expect(levels.filter((level) => level === 1)).toHaveLength(1);
    levels.forEach((level, index) => {
      expect(level - (levels[index - 1] ?? 0)).toBeLessThanOrEqual(1);
    });
    const ids = tags.flatMap(({ attributes }) => attributes.get('id') ?? []);
    expect(new Set(ids).size).toBe(ids.length);
    const targets = named(tags, 'a').map(({ attributes }) => attributes.get('href')?.slice(1));
    for (const target of targets) expect(ids).toContain(target);
  });

  it('has a caption in every table, a scope on every heading, words for every figure', () => {
    const tags = tagsOf(page);
    expect(named(tags, 'caption')).toHaveLength(named(tags, 'table').length);
    for (const { attributes } of named(tags, 'th')) {
      expect(attributes.get('scope')).toMatch(/^(?:col|row)$/);
    }
    for (const { attributes } of named(tags, 'svg')) {
      expect(attributes.get('role')).toBe('img');
      expect(attributes.get('aria-label')).toMatch(/\w+/);
    }
  });

  it('says what a report must say', () => {
    const prose = page.replaceAll(/\s+/g, ' ');
    for (const text of [
      body.protocol.sha256,
      body.snapshot.sha256,
      'engine of the test',
      'seed-of-the-test',
      'c'.repeat(64),
      'cold-hands',
      'Ethics approval and informed consent',
      'a qualified statistician',
      'Local rules come first',
      'Freeman 1989',
      'Morey 2008',
      'Holm 1979',
      'Schuirmann 1987',
      'Wilson 1927',
    ]) {
      expect(prose).toContain(text);
    }
    expect(prose).toContain('this analysis is itself a look');
    expect(prose).toContain('2 times');
  });

  it('states each primary comparison with estimate, interval, adjusted p and its limits', () => {
    const findings = page.match(/<div class="finding">[\s\S]*?<\/div>/g) ?? [];
    // Three pairs of three conditions for four measures, two against the reference for the fifth.
    expect(findings).toHaveLength(4 * 3 + 2);
    for (const finding of findings) {
      expect(finding).toMatch(/95\s% interval|no interval/);
      expect(finding).toMatch(/adjusted\s+p\s(?:=|&lt;|&gt;)\s/);
      expect(finding).toContain('does not say');
    }
  });

  it('prints estimates that are those of the result', () => {
    const time = body.result.measures[0]!;
    const [first] = time.method!.comparisonSets[0]!.comparisons;
    if (first?.estimable !== true) throw new Error('the comparison can be estimated');
    expect(page).toContain(`at ${Math.exp(first.estimate).toFixed(3)} times that under`);
  });

  it('names the sources of the methods used, and no others', () => {
    const protocol = mixedProtocol();
    const [plan] = protocol.analysis.measures;
    const alone = {
      ...protocol,
      measures: protocol.measures.slice(0, 1),
      analysis: { measures: [{ ...plan!, multiplicity: 'none' as const, equivalence: null }] },
    };
    const citations = bodyOf(alone, snapshotWith('Lab')).sources.map(({ citation }) => citation);
    expect(citations.join()).toContain('Mauchly 1940');
    expect(citations.join()).not.toMatch(/Friedman|Holm|Schuirmann|Wilson 1927/);
  });
});

describe('reportBody', () => {
  it('has no time, number or requester in it, and the looks of the snapshot', () => {
    expect(Object.keys(body).toSorted()).toEqual([
      'engineVersion',
      'formatVersion',
      'looks',
      'protocol',
      'result',
      'seed',
      'snapshot',
      'sources',
      'studyId',
    ]);
    expect(body.looks).toEqual([{ kind: 'analysis', duringEnrolment: true, count: 2 }]);
    expect(canonicalReportBody(body)).not.toMatch(/\d{4}-\d\d-\d\dT/);
  });

  it('comes back from its canonical text, and gives the same page', () => {
    const parsed: ReportBody = JSON.parse(canonicalReportBody(body));
    expect(parsed).toEqual(body);
    expect(reportPage(parsed, 'c'.repeat(64))).toBe(page);
  });
});
