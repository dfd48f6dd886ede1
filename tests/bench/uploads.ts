// npm run bench:uploads [-- rows rounds]
//
// Rows a second of trial uploads through HTTP, every check included, beside a plain COPY of the same
// rows into tables of the same shape (columns, indexes, foreign keys), in the same run on the same
// server. Rounds alternate which goes first; what counts is the ratio. The server runs in a process
// of its own, as it does in use; its highest memory so far is read from Linux's /proc.
import { spawn } from 'node:child_process';
import { hash, randomBytes } from 'node:crypto';
import { mkdtempSync, readFileSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { createInterface } from 'node:readline';
import { pipeline } from 'node:stream/promises';
import postgres from 'postgres';
import { startEmbeddedPostgres } from '#platform/embedded-postgres.ts';
import { uuidv7 } from '#platform/ids.ts';
import { type LargeRow, type LargeStudy, largeRows, largeStudy } from '../support/large-study.ts';

const REPETITIONS = 250;
const PERIODS = 4;
const MEDIA_TYPES = ['application/x-ndjson', 'text/csv', 'application/json'] as const;
type MediaType = (typeof MEDIA_TYPES)[number];

const rowsWanted = Number(process.argv[2] ?? 100_000);
const rounds = Number(process.argv[3] ?? 3);
const participants = Math.ceil(rowsWanted / (REPETITIONS * PERIODS));

const MEASURES = ['pegboard-time', 'pegs-dropped', 'part-misseated', 'hand-comfort'];

/** The text of an upload of these rows. */
function uploadText(rows: readonly LargeRow[], mediaType: MediaType): string {
  if (mediaType === 'application/json') return JSON.stringify(rows);
  if (mediaType === 'application/x-ndjson') {
    return rows.map((row) => `${JSON.stringify(row)}\n`).join('');
  }
  const fields = ['participant', 'period', 'repetition', 'condition', 'recordId'] as const;
  const header = [...fields, 'startedAt', 'endedAt', ...MEASURES].join(',');
  const lines = rows.map((row) => {
    const values = MEASURES.map((measure) => row.values[measure] ?? '');
    return [...fields.map((field) => row[field]), row.startedAt, row.endedAt, ...values].join(',');
  });
  return `${[header, ...lines].join('\r\n')}\r\n`;
}

interface CopyTexts {
  readonly trials: string;
  readonly contents: string;
}

/** The same rows as COPY takes them, with salts and commitments made beforehand. */
function copyTexts(rows: readonly LargeRow[], study: LargeStudy, ids: Ids): CopyTexts {
  let trials = '';
  let contents = '';
  for (const row of rows) {
    const id = uuidv7();
    const { period, repetition, condition, recordId, values, startedAt, endedAt } = row;
    const rest = { note: null, missing: {}, values, startedAt, endedAt };
    const content = JSON.stringify({ condition, period, recordId, repetition, ...rest });
    const salt = randomBytes(16);
    const commitment = hash('sha256', Buffer.concat([salt, Buffer.from(content)]));
    const person = ids.participants.get(row.participant) ?? '';
    const place = `${id}\t${study.studyId}\t${person}\t${period}\t${repetition}\t1\tt`;
    trials += `${place}\t${condition}\tf\t{}\t${commitment}\t${ids.uploadId}\t${row.endedAt}\n`;
    contents += `${id}\t${study.studyId}\t${person}\t${recordId}\t1\t`;
    contents += `\\\\x${salt.toString('hex')}\t${content}\n`;
  }
  return { trials, contents };
}

interface Ids {
  readonly participants: ReadonlyMap<string, string>;
  readonly uploadId: string;
}

/** Tables like the service's own, with their indexes and foreign keys. */
async function makePlainTables(sql: postgres.Sql): Promise<void> {
  await sql.unsafe(`
    create table plain_trials (like trials including all);
    create table plain_trial_contents (like trial_contents including all);
    alter table plain_trials add foreign key (study_id) references studies (id),
      add foreign key (participant_id) references participants (id),
      add foreign key (upload_id) references uploads (id);
    alter table plain_trial_contents add foreign key (trial_id) references plain_trials (id);`);
}

async function timedCopy(sql: postgres.Sql, texts: CopyTexts): Promise<number> {
  const before = performance.now();
  await sql.begin(async (tx) => {
    const trials = await tx`
      copy plain_trials (id, study_id, participant_id, period, repetition, version, current,
        condition, deviation, flags, commitment, upload_id, received_at) from stdin`.writable();
    await pipeline(pieces(texts.trials), trials);
    const contents = await tx`
      copy plain_trial_contents (trial_id, study_id, participant_id, record_id, version, salt,
        content) from stdin`.writable();
    await pipeline(pieces(texts.contents), contents);
  });
  return (performance.now() - before) / 1000;
}

/** Pieces of the size that a program reading a file would send. */
function* pieces(text: string): Generator<Buffer> {
  const bytes = Buffer.from(text);
  for (let at = 0; at < bytes.length; at += 65_536) yield bytes.subarray(at, at + 65_536);
}

async function timedUpload(
  url: string,
  study: LargeStudy,
  body: Buffer,
  mediaType: MediaType,
): Promise<{ seconds: number; uploadId: string; accepted: number }> {
  const before = performance.now();
  const answer = await fetch(`${url}/v1/studies/${study.studyId}/uploads`, {
    method: 'POST',
    headers: { ...study.stationHeaders, 'content-type': mediaType },
    body: new Uint8Array(body),
  });
  const upload = (await answer.json()) as { id: string; accepted: number };
  const seconds = (performance.now() - before) / 1000;
  if (answer.status !== 201) throw new Error(JSON.stringify(upload).slice(0, 1000));
  return { seconds, uploadId: upload.id, accepted: upload.accepted };
}

/** The server in a process of its own. */
async function startServer(databaseUrl: string) {
  const child = spawn(process.execPath, ['server/main.ts'], {
    cwd: join(import.meta.dirname, '../..'),
    env: {
      ...process.env,
      DATABASE_URL: databaseUrl,
      FAIRTURN_PORT: '0',
      FAIRTURN_WORKERS: '0',
      FAIRTURN_LOG_LEVEL: 'error',
    },
    stdio: ['ignore', 'pipe', 'inherit'],
  });
  let token = '';
  for await (const line of createInterface({ input: child.stdout })) {
    token = /^\s+(fairturn_\S+)$/.exec(line)?.[1] ?? token;
    const url = /listens on (\S+)/.exec(line)?.[1];
    if (url !== undefined) return { child, url, token };
  }
  throw new Error('The server ended before it listened.');
}

function highestMemory(pid: number | undefined): string {
  try {
    const kilobytes = /VmHWM:\s+(\d+) kB/.exec(readFileSync(`/proc/${pid}/status`, 'utf8'))?.[1];
    return `${Math.round(Number(kilobytes) / 1024)} MiB`;
  } catch {
    return 'not known here';
  }
}

function median(values: readonly number[]): number {
  const sorted = values.toSorted((a, b) => a - b);
  const middle = (sorted.length - 1) / 2;
  return ((sorted[Math.floor(middle)] ?? 0) + (sorted[Math.ceil(middle)] ?? 0)) / 2;
}

const folder = mkdtempSync(join(tmpdir(), 'fairturn-bench-'));
const server = await startEmbeddedPostgres({ folder, log: () => undefined });
const { child, url, token } = await startServer(server.url);
const sql = postgres(server.url, { max: 1, onnotice: () => undefined });
try {
  await makePlainTables(sql);
  const study = await largeStudy(url, token, {
    repetitions: REPETITIONS,
    targetEnrolment: 1 + participants * rounds * MEDIA_TYPES.length,
  });
  const [first] = await study.arrive(1);
  if (first === undefined) throw new Error('Nobody arrived.');
  const warm = uploadText([...largeRows([first], REPETITIONS)], 'application/x-ndjson');
  const warmed = await timedUpload(url, study, Buffer.from(warm), 'application/x-ndjson');
  process.stdout.write(`Server before: ${highestMemory(child.pid)} at most\n`);
  for (const mediaType of MEDIA_TYPES) {
    const ratios: number[] = [];
    for (let round = 0; round < rounds; round += 1) {
      const people = await study.arrive(participants);
      const rows = [...largeRows(people, REPETITIONS)];
      const texts = copyTexts(rows, study, {
        participants: new Map(people.map(({ id, code }) => [code, id])),
        uploadId: warmed.uploadId,
      });
      const body = Buffer.from(uploadText(rows, mediaType));
      const plainFirst = round % 2 === 0 ? await timedCopy(sql, texts) : null;
      const { seconds, accepted } = await timedUpload(url, study, body, mediaType);
      if (accepted !== rows.length) throw new Error(`${accepted} of ${rows.length} accepted`);
      const plain = plainFirst ?? (await timedCopy(sql, texts));
      const rate = Math.round(rows.length / seconds);
      const plainRate = Math.round(rows.length / plain);
      ratios.push(plain / seconds);
      process.stdout.write(
        `${mediaType}, ${rows.length} rows, ${Math.round(body.length / 1e5) / 10} MB: ` +
          `upload ${rate} rows/s, plain COPY ${plainRate} rows/s, ` +
          `ratio ${(plain / seconds).toFixed(2)}\n`,
      );
    }
    process.stdout.write(`${mediaType}: median ratio ${median(ratios).toFixed(2)}\n`);
  }
  process.stdout.write(`Server after: ${highestMemory(child.pid)} at most\n`);
} finally {
  await sql.end();
  child.kill('SIGTERM');
  await new Promise((resolve) => child.once('close', resolve));
  await server.stop();
  rmSync(folder, { recursive: true, force: true });
}
