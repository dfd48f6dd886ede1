import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import {
  type Arrival,
  Fairturn,
  isProblem,
  type TrialRow,
  type UploadProgress,
} from '../../client-sdk/src/index.ts';
import { type FaultyProxy, startFaultyProxy } from './faulty-proxy.ts';
import { createLinerStudy, type LinerStudy } from './liner-study.ts';
import { type ListeningService, startListeningService } from './listening-service.ts';

let service: ListeningService;
let proxy: FaultyProxy;
let liner: LinerStudy;
let station: Fairturn;

beforeAll(async () => {
  service = await startListeningService();
  proxy = await startFaultyProxy(service.url);
  const washout = { minimum: 'PT0S', maximum: null };
  liner = await createLinerStudy(service, { name: 'Uploads', washout });
  station = new Fairturn({
    url: proxy.url,
    token: liner.stationTokens[0],
    operator: 'OP-1',
    retry: { attempts: 6, pauseMs: 1, pauseMsMax: 2 },
  });
});

beforeEach(() => {
  proxy.faults.length = 0;
  proxy.seen.length = 0;
});

afterAll(async () => {
  await proxy.close();
  await service.close();
});

/** The trials of a participant who has just arrived: 4 periods of 3 repetitions. */
async function participantRows(): Promise<TrialRow[]> {
  const study = station.study(liner.study.id);
  const arrival = await study.arrive({ kind: 'new', stratum: { shift: 'late' } });
  for (const { period } of arrival.periods) {
    await study.startPeriod(arrival.participant.code, { period });
  }
  proxy.seen.length = 0;
  return rowsOf(arrival);
}

function rowsOf({ participant, periods }: Arrival): TrialRow[] {
  return periods.flatMap(({ period, condition }) =>
    [1, 2, 3].map((repetition) => ({
      participant: participant.code,
      period,
      repetition,
      condition: condition.key,
      recordId: `${participant.code}-${period}-${repetition}`,
      values: {
        'pegboard-time': 20 + period + repetition / 10,
        'pegs-dropped': repetition - 1,
        'part-misseated': repetition === 3,
        ...(repetition === 1 ? { 'hand-comfort': period } : {}),
      },
      startedAt: '2026-12-01T10:00:00Z',
    })),
  );
}

async function storedOf(code: string | undefined): Promise<string[]> {
  const stored: string[] = [];
  for await (const trial of liner.study.exportTrials()) {
    if (trial.participant === code) stored.push(trial.recordId ?? '');
  }
  return stored.sort();
}

describe('an upload', () => {
  it('stores each row once, and says so when the same rows come again', async () => {
    const rows = await participantRows();
    const study = station.study(liner.study.id);
    const first = await study.upload(rows);
    expect(first).toMatchObject({ rows: 12, accepted: 12, repeated: 0, refused: 0, faults: [] });
    const second = await study.upload(rows);
    expect(second).toMatchObject({ rows: 12, accepted: 0, repeated: 12, refused: 0 });
    expect(await storedOf(rows[0]?.participant)).toEqual(rows.map((r) => r.recordId).sort());
  });

  it('in batches from a source that can be read once survives a link that fails', async () => {
    const rows = await participantRows();
    proxy.faults.push('cut-after', 'cut-before', { status: 503 }, 'cut-within', 'cut-after');
    const progress: UploadProgress[] = [];
    async function* source() {
      for (const row of rows) yield row;
    }
    const outcome = await station.study(liner.study.id).upload(source(), {
      acceptance: 'valid-rows',
      batchRows: 5,
      onProgress: (news) => progress.push(news),
    });
    expect(progress).toEqual([
      { rowsSent: 5, batchesSent: 1 },
      { rowsSent: 10, batchesSent: 2 },
      { rowsSent: 12, batchesSent: 3 },
    ]);
    // The repeat of a batch gets the first answer: nothing counts as "there already".
    expect(outcome).toMatchObject({ rows: 12, accepted: 12, repeated: 0, refused: 0 });
    expect(proxy.seen).toHaveLength(8);
    expect(new Set(proxy.seen.map(({ key }) => key)).size).toBe(3);
    expect(await storedOf(rows[0]?.participant)).toHaveLength(12);
    const kept = await liner.study.uploads().all();
    expect(outcome.uploads.every(({ id }) => kept.some((upload) => upload.id === id))).toBe(true);
  });

  it('is all or nothing unless asked otherwise, and counts rows over all batches', async () => {
    const rows = await participantRows();
    const spoilt = rows.map((row, index) => (index === 8 ? { ...row, period: 9 } : row));
    const study = station.study(liner.study.id);
    const refusal = await study.upload(spoilt).catch((caught: unknown) => caught);
    if (!isProblem(refusal, 'upload-refused')) throw refusal;
    expect(refusal.faults.map(({ row, pointer }) => [row, pointer])).toEqual([[9, '/period']]);
    expect(await storedOf(rows[0]?.participant)).toEqual([]);

    const outcome = await study.upload(spoilt, { acceptance: 'valid-rows', batchRows: 5 });
    expect(outcome).toMatchObject({ rows: 12, accepted: 11, refused: 1 });
    expect(outcome.faults.map(({ row, pointer }) => [row, pointer])).toEqual([[9, '/period']]);
    const refusedIn = outcome.uploads.find(({ refused }) => refused > 0);
    const kept = await study.refusedRows(refusedIn?.id ?? '').all();
    expect(kept.map(({ raw }) => JSON.parse(raw ?? 'null'))).toEqual([spoilt[8]]);
  });

  it('marks a condition that was not the assigned one, and keeps it', async () => {
    const rows = await participantRows();
    const first = rows.slice(0, 3);
    const other = rows[3]?.condition ?? '';
    const outcome = await station
      .study(liner.study.id)
      .upload(first.map((row) => ({ ...row, condition: other })));
    expect(outcome).toMatchObject({ accepted: 3, deviations: 3 });
  });
});

describe('an export', () => {
  it('is one CSV record a trial under a header', async () => {
    const stored = await liner.study.exportTrials();
    let trials = 0;
    for await (const _trial of stored) trials += 1;
    const text = await new Response(await liner.study.exportCsv()).text();
    const [header, ...records] = text.trimEnd().split('\r\n');
    expect(header).toContain('pegboard-time');
    expect(records).toHaveLength(trials);
  });
});
