import type { Connection } from './connection.ts';
import { ProblemError } from './problems.ts';
import type { TrialRow, Upload, UploadFault } from './schemas.ts';

export interface UploadOptions {
  /**
   * What happens to an upload with faults: `all-or-nothing`, the default, stores none of its rows;
   * `valid-rows` stores those without a fault.
   */
  readonly acceptance?: 'all-or-nothing' | 'valid-rows';
  /**
   * Rows that go into one request. Default: with `valid-rows` 2000; with `all-or-nothing` all of
   * them, since nothing less keeps that word. A number given here makes it hold batch by batch.
   */
  readonly batchRows?: number;
  /** Called after each batch that the service took. */
  readonly onProgress?: (progress: UploadProgress) => void;
  readonly signal?: AbortSignal;
}

export interface UploadProgress {
  readonly rowsSent: number;
  readonly batchesSent: number;
}

/** What became of all rows together. */
export interface UploadOutcome {
  /** The service's record of each batch. */
  readonly uploads: readonly Upload[];
  readonly rows: number;
  readonly accepted: number;
  /** Rows that had been stored by an earlier upload, with the same values. */
  readonly repeated: number;
  readonly refused: number;
  /** Rows with an implausible value, stored and flagged. */
  readonly flagged: number;
  /** Rows whose condition is not the assigned one, stored and flagged. */
  readonly deviations: number;
  /** Rows are counted over the whole upload, from 1. */
  readonly faults: readonly UploadFault[];
}

const DEFAULT_BATCH_ROWS = 2000;

/**
 * Sends trial rows as NDJSON. Each batch is one request with an Idempotency-Key of its own, kept
 * until it is answered, so that even a source that can be read only once survives a bad link.
 *
 * @throws {ProblemError} `upload-refused`, with rows counted over the whole upload
 */
export async function uploadRows(
  connection: Connection,
  studyId: string,
  rows: Iterable<TrialRow> | AsyncIterable<TrialRow>,
  options: UploadOptions,
): Promise<UploadOutcome> {
  const { acceptance = 'all-or-nothing', onProgress, signal } = options;
  const fallback = acceptance === 'valid-rows' ? DEFAULT_BATCH_ROWS : Number.POSITIVE_INFINITY;
  const uploads: Upload[] = [];
  let rowsSent = 0;
  for await (const batch of batchesOf(rows, options.batchRows ?? fallback)) {
    const path = `/v1/studies/${encodeURIComponent(studyId)}/uploads?acceptance=${acceptance}`;
    const request = { path, body: batch.text, ...(signal === undefined ? {} : { signal }) };
    uploads.push(await sendBatch(connection, request, rowsSent));
    rowsSent += batch.rows;
    onProgress?.({ rowsSent, batchesSent: uploads.length });
  }
  return outcomeOf(uploads);
}

async function sendBatch(
  connection: Connection,
  request: { path: string; body: string; signal?: AbortSignal },
  rowsBefore: number,
): Promise<Upload> {
  try {
    const headers = { 'content-type': 'application/x-ndjson' };
    const response = await connection.send({ method: 'POST', headers, ...request });
    const upload = (await response.json()) as Upload;
    return { ...upload, faults: shifted(upload.faults, rowsBefore) };
  } catch (error) {
    if (!(error instanceof ProblemError)) throw error;
    const problem = error.toProblem();
    const faults = shifted(problem.faults ?? [], rowsBefore);
    throw new ProblemError(faults.length > 0 ? { ...problem, faults } : problem);
  }
}

/** Faults of a batch, with their rows counted over the whole upload. */
function shifted<Fault extends { readonly row?: number }>(
  faults: readonly Fault[],
  rowsBefore: number,
): Fault[] {
  return faults.map((fault) =>
    fault.row === undefined ? fault : { ...fault, row: fault.row + rowsBefore },
  );
}

async function* batchesOf(
  rows: Iterable<TrialRow> | AsyncIterable<TrialRow>,
  size: number,
): AsyncGenerator<{ text: string; rows: number }, void, undefined> {
  if (!(size >= 1)) throw new RangeError('A batch holds at least one row.');
  let lines: string[] = [];
  for await (const row of rows) {
    lines.push(JSON.stringify(row));
    if (lines.length < size) continue;
    yield { text: ndjson(lines), rows: lines.length };
    lines = [];
  }
  if (lines.length > 0) yield { text: ndjson(lines), rows: lines.length };
}

/** Rows as NDJSON, one a line. */
export function ndjson(lines: readonly string[]): string {
  return lines.map((line) => `${line}\n`).join('');
}

function outcomeOf(uploads: readonly Upload[]): UploadOutcome {
  const sum = (count: (upload: Upload) => number) =>
    uploads.reduce((total, upload) => total + count(upload), 0);
  return {
    uploads,
    rows: sum(({ rows }) => rows),
    accepted: sum(({ accepted }) => accepted),
    repeated: sum(({ repeated }) => repeated),
    refused: sum(({ refused }) => refused),
    flagged: sum(({ flagged }) => flagged),
    deviations: sum(({ deviations }) => deviations),
    faults: uploads.flatMap(({ faults }) => faults),
  };
}
