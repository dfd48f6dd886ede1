import type { Operation } from '#server/access/permissions.ts';
import { gloveProtocol } from './analysed-study.ts';
import type { Caller, TestService } from './app.ts';

/** Ids of one lab's things, and callers of every role that has its place there. */
export interface Place {
  readonly service: TestService;
  readonly administrator: Caller;
  readonly lead: Caller;
  readonly station: Caller;
  readonly labId: string;
  readonly siteId: string;
  readonly stationId: string;
  readonly accountId: string;
  readonly studyId: string;
  readonly code: string;
  readonly uploadId: string;
  readonly analysisId: string;
  readonly reportId: string;
}

export interface ExampleRequest {
  readonly method: 'GET' | 'POST' | 'PUT';
  readonly url: string;
  readonly body?: object;
  readonly headers?: Record<string, string>;
}

/** A request with its own key, since every example may be sent by several roles. */
function post(url: string, body?: object): ExampleRequest {
  const headers = { 'idempotency-key': crypto.randomUUID() };
  return body === undefined
    ? { method: 'POST', url, headers }
    : { method: 'POST', url, body, headers };
}

function get(url: string): ExampleRequest {
  return { method: 'GET', url };
}

/** A new participant of the place's study, since some operations end one. */
async function freshCode(place: Place): Promise<string> {
  const { method: _, ...request } = post(`/v1/studies/${place.studyId}/arrivals`, { kind: 'new' });
  const answer = await place.station.post(request.url, request.body, request.headers);
  if (answer.status !== 201) throw new Error(answer.text);
  return answer.body.participant.code;
}

/** Another registered study of the place, since some operations end one. */
export async function freshStudy(lead: Caller, siteId: string): Promise<string> {
  const study = await lead.post('/v1/studies', { name: `Study ${crypto.randomUUID()}` });
  const url = `/v1/studies/${study.body.id}`;
  const protocol = gloveProtocol(siteId);
  const draft = await lead.put(`${url}/protocol-draft`, { revision: 0, protocol });
  const version = await lead.post(`${url}/protocol-versions`, { revision: draft.body.revision });
  if (version.status !== 201) throw new Error(version.text);
  return study.body.id;
}

/** A study with a draft that may be edited, checked and registered. */
async function draftedStudy(place: Place): Promise<string> {
  const study = await place.lead.post('/v1/studies', { name: `Draft ${crypto.randomUUID()}` });
  const protocol = gloveProtocol(place.siteId);
  const url = `/v1/studies/${study.body.id}/protocol-draft`;
  const draft = await place.lead.put(url, { revision: 0, protocol });
  if (draft.status !== 200) throw new Error(draft.text);
  return study.body.id;
}

async function freshAccount(place: Place): Promise<string> {
  const body = { name: 'Spare', labId: place.labId };
  return (await place.administrator.post('/v1/accounts', body)).body.id;
}

async function freshStationToken(place: Place): Promise<string> {
  const body = {
    role: 'station',
    stationId: place.stationId,
    label: 'spare',
    lifetimeSeconds: 600,
  };
  return (await place.administrator.post('/v1/tokens', body)).body.id;
}

function trialRow(code: string) {
  return {
    participant: code,
    period: 1,
    repetition: 1,
    condition: 'thin',
    recordId: crypto.randomUUID(),
    values: { time: 21.5 },
    missing: {},
    startedAt: '2026-11-03T09:00:00Z',
  };
}

const study = (place: Place, rest = '') => `/v1/studies/${place.studyId}${rest}`;
const person = (place: Place, code: string, rest = '') =>
  `/v1/studies/${place.studyId}/participants/${code}${rest}`;

/**
 * For every operation a request that its roles may send with success at the given place. The type
 * makes a new operation without an example a compile-time fault.
 */
export const exampleRequests: Record<
  Operation,
  (place: Place) => ExampleRequest | Promise<ExampleRequest>
> = {
  createLab: () => post('/v1/labs', { name: `Lab ${crypto.randomUUID()}` }),
  listLabs: () => get('/v1/labs'),
  createSite: (place) => post(`/v1/labs/${place.labId}/sites`, { name: crypto.randomUUID() }),
  listSites: () => get('/v1/sites'),
  createStation: (place) =>
    post(`/v1/sites/${place.siteId}/stations`, { name: crypto.randomUUID() }),
  listStations: (place) => get(`/v1/sites/${place.siteId}/stations`),
  createAccount: (place) => post('/v1/accounts', { name: 'Somebody', labId: place.labId }),
  listAccounts: () => get('/v1/accounts'),
  closeAccount: async (place) => post(`/v1/accounts/${await freshAccount(place)}/closure`),
  createToken: (place) =>
    post('/v1/tokens', {
      role: 'station',
      stationId: place.stationId,
      label: 'bench',
      lifetimeSeconds: 600,
    }),
  listTokens: () => get('/v1/tokens'),
  revokeToken: async (place) => post(`/v1/tokens/${await freshStationToken(place)}/revocation`),
  getOwnToken: () => get('/v1/tokens/own'),

  getAuditPublicKey: () => get('/v1/audit/public-key'),
  listAuditEntries: (place) => get(`/v1/audit/chains/${place.studyId}/entries`),
  makeCheckpoint: () => post('/v1/audit/checkpoints'),
  listCheckpoints: () => get('/v1/audit/checkpoints'),
  verifyAudit: () => post('/v1/audit/verifications', {}),

  createStudy: () => post('/v1/studies', { name: `Study ${crypto.randomUUID()}` }),
  listStudies: () => get('/v1/studies'),
  getStudy: (place) => get(study(place)),
  getProtocolDraft: async (place) => get(`/v1/studies/${await draftedStudy(place)}/protocol-draft`),
  putProtocolDraft: async (place) => ({
    method: 'PUT',
    url: `/v1/studies/${await draftedStudy(place)}/protocol-draft`,
    body: { revision: 1, protocol: gloveProtocol(place.siteId) },
  }),
  checkProtocolDraft: async (place) =>
    post(`/v1/studies/${await draftedStudy(place)}/protocol-draft/check`),
  registerProtocol: async (place) =>
    post(`/v1/studies/${await draftedStudy(place)}/protocol-versions`, { revision: 1 }),
  listProtocolVersions: (place) => get(study(place, '/protocol-versions')),
  getProtocolVersion: (place) => get(study(place, '/protocol-versions/1')),
  previewScheme: (place) => {
    const { withinFactors, scheme } = gloveProtocol(place.siteId);
    return post('/v1/scheme-previews', { withinFactors, scheme, periods: 2 });
  },
  pauseStudy: async (place) =>
    post(`/v1/studies/${await freshStudy(place.lead, place.siteId)}/pause`, {}),
  resumeStudy: async (place) => {
    const id = await freshStudy(place.lead, place.siteId);
    await place.lead.post(`/v1/studies/${id}/pause`, {});
    return post(`/v1/studies/${id}/resume`, {});
  },
  closeStudy: async (place) =>
    post(`/v1/studies/${await freshStudy(place.lead, place.siteId)}/closure`, {}),
  getAllocationSecret: async (place) => {
    const id = await freshStudy(place.lead, place.siteId);
    await place.lead.post(`/v1/studies/${id}/closure`, {});
    return get(`/v1/studies/${id}/allocation-secret`);
  },

  recordArrival: (place) => post(study(place, '/arrivals'), { kind: 'new' }),
  getDuePeriod: (place) => get(person(place, place.code, '/due')),
  startPeriod: async (place) =>
    post(person(place, await freshCode(place), '/period-starts'), { period: 1 }),
  recordWithdrawal: async (place) =>
    post(person(place, await freshCode(place), '/withdrawal'), {
      reasonCode: 'schedule',
      periodReached: 0,
    }),
  voidArrival: async (place) =>
    post(person(place, await freshCode(place), '/void'), { reason: 'Typed in twice' }),
  listParticipants: (place) => get(study(place, '/participants')),
  getParticipant: (place) => get(person(place, place.code)),
  getBalance: (place) => get(study(place, '/balance')),
  replayAllocations: async (place) => {
    const id = await freshStudy(place.lead, place.siteId);
    await place.lead.post(`/v1/studies/${id}/closure`, {});
    return post(`/v1/studies/${id}/replays`);
  },

  estimatePredictability: (place) => {
    const { withinFactors, scheme, policy } = gloveProtocol(place.siteId);
    const size = { sites: 2, stationsPerSite: 1, participantsPerSite: 4, studies: 2, imagined: 2 };
    const plan = { withinFactors, scheme, periods: 2, policies: [policy] };
    return post('/v1/predictability-estimates', { ...plan, ...size });
  },

  uploadTrials: async (place) => {
    const request = post(study(place, '/uploads'), [trialRow(await freshCode(place))]);
    return { ...request, url: `${request.url}?acceptance=valid-rows` };
  },
  listUploads: (place) => get(study(place, '/uploads')),
  getUpload: (place) => get(study(place, `/uploads/${place.uploadId}`)),
  listRefusedRows: (place) => get(study(place, `/uploads/${place.uploadId}/refused-rows`)),
  correctTrial: (place) => {
    const { recordId: _, ...row } = trialRow(place.code);
    const values = { time: 20 + Math.round(Math.random() * 1e6) / 1e6 };
    return post(study(place, '/trial-corrections'), { ...row, values, reason: 'Misread clock' });
  },
  exportTrials: (place) => ({
    method: 'GET',
    url: study(place, '/trials'),
    headers: { accept: 'application/x-ndjson' },
  }),
  eraseParticipant: async (place) =>
    post(person(place, await freshCode(place), '/erasure'), { reasonCode: 'participant-request' }),

  requestAnalysis: (place) => post(study(place, '/analyses'), {}),
  listAnalyses: (place) => get(study(place, '/analyses')),
  getAnalysis: (place) => get(`/v1/analyses/${place.analysisId}`),
  followAnalysis: (place) => get(`/v1/analyses/${place.analysisId}/events`),
  cancelAnalysis: async (place) => {
    const { body } = await place.lead.post(study(place, '/analyses'), {});
    return post(`/v1/analyses/${body.id}/cancellation`);
  },
  listReports: (place) => get(study(place, '/reports')),
  getReport: (place) => get(`/v1/reports/${place.reportId}`),
  getReportBody: (place) => get(`/v1/reports/${place.reportId}/body`),
  getReportPage: (place) => get(`/v1/reports/${place.reportId}/page`),
  recomputeReport: (place) => post(`/v1/reports/${place.reportId}/recomputations`),
};
