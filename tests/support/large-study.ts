import { exampleProtocol } from './example-protocol.ts';

/** A study of one site whose participants have many trials, made through the API of a service. */
export interface LargeStudy {
  readonly studyId: string;
  readonly siteId: string;
  readonly stationHeaders: Record<string, string>;
  readonly leadHeaders: Record<string, string>;
  /** Checks in so many more participants. */
  arrive(count: number): Promise<LargeParticipant[]>;
}

export interface LargeParticipant {
  readonly id: string;
  readonly code: string;
  /** Condition keys by period. */
  readonly conditions: readonly string[];
}

/** One record as an upload has it; invented. */
export interface LargeRow {
  readonly participant: string;
  readonly period: number;
  readonly repetition: number;
  readonly condition: string;
  readonly recordId: string;
  readonly values: Readonly<Record<string, number | boolean>>;
  readonly startedAt: string;
  readonly endedAt: string;
}

const PERIODS = 4;

/** What of the answers to the setting up is needed. */
interface Made {
  readonly id: string;
  readonly token: string;
  readonly participant: { readonly id: string; readonly code: string };
  readonly periods: readonly { readonly condition: { readonly key: string } }[];
}

/** The example protocol with so many repetitions in each of its four periods. */
export async function largeStudy(
  url: string,
  administrator: string,
  options: { readonly repetitions: number; readonly targetEnrolment: number },
): Promise<LargeStudy> {
  const post = async (
    path: string,
    body: object,
    headers: Record<string, string>,
  ): Promise<Made> => {
    const answer = await fetch(`${url}${path}`, {
      method: 'POST',
      headers: { 'content-type': 'application/json', ...headers },
      body: JSON.stringify(body),
    });
    if (!answer.ok) throw new Error(`${path}: ${answer.status} ${await answer.text()}`);
    return (await answer.json()) as Made;
  };
  const asAdministrator = bearer(administrator);
  const lab = await post('/v1/labs', { name: 'Cold lab' }, asAdministrator);
  const site = await post(`/v1/labs/${lab.id}/sites`, { name: 'Harbour' }, asAdministrator);
  const station = await post(`/v1/sites/${site.id}/stations`, { name: 'Bench' }, asAdministrator);
  const account = await post('/v1/accounts', { name: 'Lead', labId: lab.id }, asAdministrator);
  const token = async (place: object) => {
    const body = { label: 'large', lifetimeSeconds: 86_400, ...place };
    return bearer((await post('/v1/tokens', body, asAdministrator)).token);
  };
  const leadHeaders = await token({ role: 'study-lead', accountId: account.id, labId: lab.id });
  const stationHeaders = {
    ...(await token({ role: 'station', stationId: station.id })),
    'operator-code': 'op-1',
  };
  const protocol = exampleProtocol([{ siteId: site.id, targetEnrolment: options.targetEnrolment }]);
  const study = await post('/v1/studies', { name: 'Large' }, leadHeaders);
  const base = `/v1/studies/${study.id}`;
  const draft = await fetch(`${url}${base}/protocol-draft`, {
    method: 'PUT',
    headers: { 'content-type': 'application/json', ...leadHeaders },
    body: JSON.stringify({
      revision: 0,
      protocol: {
        ...protocol,
        periods: { ...protocol.periods, repetitions: options.repetitions },
      },
    }),
  });
  if (!draft.ok) throw new Error(await draft.text());
  await post(`${base}/protocol-versions`, { revision: 1 }, leadHeaders);
  return {
    studyId: study.id,
    siteId: site.id,
    stationHeaders,
    leadHeaders,
    arrive: async (count) => {
      const arrived: LargeParticipant[] = [];
      for (let index = 0; index < count; index += 1) {
        const arrival = { kind: 'new', stratum: { shift: index % 2 === 0 ? 'early' : 'late' } };
        const key = { 'idempotency-key': crypto.randomUUID() };
        const answer = await post(`${base}/arrivals`, arrival, { ...stationHeaders, ...key });
        const conditions = answer.periods.map(({ condition }) => condition.key);
        arrived.push({ ...answer.participant, conditions });
      }
      return arrived;
    },
  };
}

/** Every planned record of these participants, in the order in which they would be taken. */
export function* largeRows(
  participants: readonly LargeParticipant[],
  repetitions: number,
): Generator<LargeRow> {
  let moment = Date.parse('2026-03-02T08:00:00Z');
  for (const [person, { code, conditions }] of participants.entries()) {
    for (let period = 1; period <= PERIODS; period += 1) {
      for (let repetition = 1; repetition <= repetitions; repetition += 1) {
        const seconds = 14 + ((person * 7 + period * 5 + repetition * 3) % 200) / 10;
        const startedAt = new Date(moment).toISOString();
        moment += Math.round(seconds * 1000);
        yield {
          participant: code,
          period,
          repetition,
          condition: conditions[period - 1] ?? '',
          recordId: crypto.randomUUID(),
          values: {
            'pegboard-time': seconds,
            'pegs-dropped': (person + repetition) % 4,
            'part-misseated': (period + repetition) % 9 === 0,
            ...(repetition === 1 ? { 'hand-comfort': 1 + ((person + period) % 7) } : {}),
          },
          startedAt,
          endedAt: new Date(moment).toISOString(),
        };
      }
    }
  }
}

function bearer(token: string): Record<string, string> {
  return { authorization: `Bearer ${token}` };
}
