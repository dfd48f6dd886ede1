import type { TestService } from './app.ts';

type Caller = ReturnType<TestService['as']>;

/** A registered study of one lab with one site, and a caller for each role that matters to it. */
export interface AnalysedStudy {
  readonly studyId: string;
  readonly labId: string;
  readonly siteId: string;
  readonly lead: Caller;
  readonly leadToken: string;
  readonly analyst: Caller;
  readonly auditor: Caller;
  readonly station: Caller;
  /** A study lead of another lab. */
  readonly stranger: Caller;
}

/** One participant as a station sees it: code, and the condition of each period. */
export interface ArrivedParticipant {
  readonly id: string;
  readonly code: string;
  readonly conditions: readonly string[];
}

/** Invented protocol: two liners of a glove, two periods, two repetitions. */
export function gloveProtocol(siteId: string) {
  return {
    title: 'Two glove liners',
    rationale: 'Invented for the tests.',
    hypotheses: [{ key: 'faster', statement: 'The thin liner is faster.' }],
    withinFactors: [
      {
        key: 'liner',
        label: 'Liner',
        levels: [
          { key: 'thin', label: 'Thin' },
          { key: 'thick', label: 'Thick' },
        ],
      },
    ],
    betweenFactors: [],
    scheme: { kind: 'williams' },
    policy: { kind: 'balanced' },
    replacement: { kind: 'same-site' },
    periods: {
      count: 2,
      repetitions: 2,
      visits: [[1, 2]],
      washout: { minimum: 'PT0S', maximum: null },
    },
    sites: [{ siteId, targetEnrolment: 400 }],
    measures: [
      {
        key: 'time',
        label: 'Pegboard time',
        unit: 's',
        scale: 'time-like',
        direction: 'lower-is-better',
        taken: 'each-trial',
        validRange: { minimum: 1, maximum: 60 },
        decimals: 1,
        points: null,
        exposure: null,
      },
    ],
    exclusions: [],
    analysis: {
      measures: [
        {
          measure: 'time',
          role: 'primary',
          method: 'repeated-measures-anova',
          primaryEstimate: 'adjusted-for-period',
          contrasts: { kind: 'all-pairs' },
          multiplicity: 'holm',
          alpha: 0.05,
          equivalence: null,
        },
      ],
    },
  };
}

/** Makes labs, people, a station and a registered study, all through the API. */
export async function registerStudy(service: TestService): Promise<AnalysedStudy> {
  const administrator = service.as(service.administrator);
  const made = async (url: string, body: object): Promise<{ id: string; token?: string }> => {
    const answer = await administrator.post(url, body);
    if (answer.status !== 201) throw new Error(`${url}: ${answer.status} ${answer.text}`);
    return answer.body;
  };
  const suffix = crypto.randomUUID().slice(0, 8);
  const lab = await made('/v1/labs', { name: `Harbour ${suffix}` });
  const otherLab = await made('/v1/labs', { name: `Ridge ${suffix}` });
  const site = await made(`/v1/labs/${lab.id}/sites`, { name: 'Quay' });
  const station = await made(`/v1/sites/${site.id}/stations`, { name: 'Bench 1' });
  const person = async (role: string, labId: string): Promise<string> => {
    const account = await made('/v1/accounts', { name: `${role} ${suffix}`, labId });
    const token = await made('/v1/tokens', {
      role,
      accountId: account.id,
      labId,
      label: role,
      lifetimeSeconds: 3600,
    });
    return token.token ?? '';
  };
  const stationToken = await made('/v1/tokens', {
    role: 'station',
    stationId: station.id,
    label: 'bench',
    lifetimeSeconds: 3600,
  });
  const leadToken = await person('study-lead', lab.id);
  const lead = service.as(leadToken);
  const studyId = await registered(lead, site.id, `Liners ${suffix}`);
  return {
    studyId,
    labId: lab.id,
    siteId: site.id,
    lead,
    leadToken,
    analyst: service.as(await person('analyst', lab.id)),
    auditor: service.as(await person('auditor', lab.id)),
    station: service.as(stationToken.token ?? '', 'OP-1'),
    stranger: service.as(await person('study-lead', otherLab.id)),
  };
}

async function registered(lead: Caller, siteId: string, name: string): Promise<string> {
  const study = await lead.post('/v1/studies', { name });
  const base = `/v1/studies/${study.body.id}`;
  const draft = await lead.put(`${base}/protocol-draft`, {
    revision: 0,
    protocol: gloveProtocol(siteId),
  });
  const version = await lead.post(`${base}/protocol-versions`, { revision: draft.body.revision });
  if (version.status !== 201) throw new Error(`not registered: ${version.text}`);
  return study.body.id;
}

/** Checks in so many participants, whose codes the service issues. */
export async function arrive(study: AnalysedStudy, count: number): Promise<ArrivedParticipant[]> {
  const arrived: ArrivedParticipant[] = [];
  for (let index = 0; index < count; index += 1) {
    const answer = await study.station.post(
      `/v1/studies/${study.studyId}/arrivals`,
      { kind: 'new' },
      { 'idempotency-key': crypto.randomUUID() },
    );
    if (answer.status !== 201) throw new Error(`no arrival: ${answer.text}`);
    const periods: { condition: { key: string } }[] = answer.body.periods;
    arrived.push({
      id: answer.body.participant.id,
      code: answer.body.participant.code,
      conditions: periods.map(({ condition }) => condition.key),
    });
  }
  return arrived;
}

/** A trial as uploaded, as far as a test computes with it. */
export interface UploadedTrial {
  readonly participant: string;
  readonly condition: string;
  readonly values: { readonly time: number };
}

/** Uploads every planned trial of these participants, with invented times. */
export async function uploadTrials(
  study: AnalysedStudy,
  participants: readonly ArrivedParticipant[],
): Promise<UploadedTrial[]> {
  const rows = participants.flatMap(({ code, conditions }, person) =>
    conditions.flatMap((condition, periodIndex) =>
      [1, 2].map((repetition) => ({
        participant: code,
        period: periodIndex + 1,
        repetition,
        condition,
        recordId: crypto.randomUUID(),
        values: { time: inventedTime(person, condition, periodIndex, repetition) },
        missing: {},
        startedAt: '2026-11-03T09:00:00Z',
      })),
    ),
  );
  const answer = await study.station.post(`/v1/studies/${study.studyId}/uploads`, rows, {
    'idempotency-key': crypto.randomUUID(),
  });
  if (answer.status !== 201) throw new Error(`no upload: ${answer.status} ${answer.text}`);
  return rows;
}

function inventedTime(
  person: number,
  condition: string,
  periodIndex: number,
  repetition: number,
): number {
  const seconds = 20 + person + (condition === 'thick' ? 4 : 0) - periodIndex;
  return seconds + ((person * 7 + repetition * 3 + periodIndex) % 5) / 10;
}
