import type { Connection } from './connection.ts';
import { linesIn } from './events.ts';
import type { ExportedTrial } from './schemas.ts';

export interface ExportOptions {
  /** `all` brings the versions that were corrected since, too. Default: `current`. */
  readonly versions?: 'current' | 'all';
  readonly signal?: AbortSignal;
}

/** An export ended before its last line was whole: the link was cut within it. */
export class ExportCutError extends Error {
  override readonly name = 'ExportCutError';
}

/** A study's trials, one by one, while they arrive. */
export async function* exportedTrials(
  connection: Connection,
  studyId: string,
  options: ExportOptions,
): AsyncGenerator<ExportedTrial, void, undefined> {
  const mediaType = 'application/x-ndjson';
  const body = await exportStream(connection, studyId, { ...options, mediaType });
  for await (const line of linesIn(body)) {
    if (line !== '') yield parsedTrial(line);
  }
}

export async function exportStream(
  connection: Connection,
  studyId: string,
  { versions = 'current', mediaType, signal }: ExportOptions & { readonly mediaType: string },
): Promise<ReadableStream<Uint8Array>> {
  const { body } = await connection.send({
    method: 'GET',
    path: `/v1/studies/${encodeURIComponent(studyId)}/trials?versions=${versions}`,
    headers: { accept: mediaType },
    streamed: true,
    ...(signal === undefined ? {} : { signal }),
  });
  if (body === null) throw new ExportCutError('The export has no body.');
  return body;
}

function parsedTrial(line: string): ExportedTrial {
  try {
    return JSON.parse(line);
  } catch {
    throw new ExportCutError('The export ended within a line.');
  }
}
