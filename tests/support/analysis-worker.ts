import { setTimeout as pause } from 'node:timers/promises';
import { fileURLToPath } from 'node:url';
import type { AnalysedStudy } from './analysed-study.ts';
import { type NodeProgram, startNodeProgram } from './node-program.ts';

const WORKER = fileURLToPath(new URL('../../server/worker.ts', import.meta.url));

/** A real worker process on this database, once it takes jobs. */
export async function startWorker(databaseUrl: string): Promise<NodeProgram> {
  const worker = startNodeProgram(WORKER, {
    environment: { DATABASE_URL: databaseUrl, FAIRTURN_LOG_LEVEL: 'info' },
  });
  await worker.line(/worker ready/);
  return worker;
}

/** What the API says of an analysis. */
export interface AnalysisState {
  readonly id: string;
  readonly state: string;
  readonly stage: string;
  readonly progress: number;
  readonly failure: string | null;
  readonly reportId: string | null;
  readonly cancelRequested: boolean;
}

type Reader = AnalysedStudy['lead'];

/** Reads an analysis again and again until `enough` says so; gives up after a minute. */
export async function analysisOnce(
  reader: Reader,
  id: string,
  enough: (analysis: AnalysisState) => boolean,
): Promise<AnalysisState> {
  let last: AnalysisState | null = null;
  for (let tries = 0; tries < 600; tries += 1) {
    const answer = await reader.get(`/v1/analyses/${id}`);
    if (answer.status !== 200) throw new Error(`analysis ${id}: ${answer.status}`);
    last = answer.body as AnalysisState;
    if (enough(last)) return last;
    await pause(100);
  }
  throw new Error(`The analysis stayed at ${JSON.stringify(last)}.`);
}

export function hasEnded({ state }: AnalysisState): boolean {
  return state !== 'queued' && state !== 'running';
}

/** Requests an analysis and waits for its report. */
export async function filedReport(study: AnalysedStudy, body: object = {}): Promise<string> {
  const requested = await study.lead.post(`/v1/studies/${study.studyId}/analyses`, body);
  if (requested.status !== 202) throw new Error(`not accepted: ${requested.text}`);
  const ended = await analysisOnce(study.lead, requested.body.id, hasEnded);
  if (ended.reportId === null) throw new Error(`no report: ${JSON.stringify(ended)}`);
  return ended.reportId;
}
