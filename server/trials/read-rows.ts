import { csvRowReader, noHeader } from './read-csv-row.ts';
import { readJsonRow } from './read-json-row.ts';
import { csvSplitter } from './split-csv.ts';
import { jsonArraySplitter } from './split-json-array.ts';
import { lineSplitter } from './split-lines.ts';
import type { RawRow, RowSplitter, UploadRow } from './upload-row.ts';

export const UPLOAD_MEDIA_TYPES = ['application/json', 'application/x-ndjson', 'text/csv'] as const;
export type UploadMediaType = (typeof UPLOAD_MEDIA_TYPES)[number];

const SPLITTERS: Readonly<Record<UploadMediaType, () => RowSplitter>> = {
  'application/json': jsonArraySplitter,
  'application/x-ndjson': lineSplitter,
  'text/csv': csvSplitter,
};

/**
 * The rows of a body, read as its bytes come, in batches: so many rows, or fewer when their texts
 * have so many characters before. Only one batch and the rows of one chunk are held at a time.
 *
 * @param measures every measure of the study's protocol versions, which CSV columns can name
 * @throws {ProblemError} `invalid-request` when the body as a whole cannot be read: not one JSON
 *   array, or CSV with a wrong header
 */
export async function* readRows(
  chunks: AsyncIterable<Buffer>,
  options: {
    readonly mediaType: UploadMediaType;
    readonly measures: ReadonlySet<string>;
    readonly batch: { readonly rows: number; readonly characters: number };
  },
): AsyncGenerator<UploadRow[]> {
  const { mediaType, measures } = options;
  const splitter = SPLITTERS[mediaType]();
  let read = mediaType === 'text/csv' ? null : readJsonRow;
  let count = 0;
  let batch: UploadRow[] = [];
  let characters = 0;
  const take = (raws: readonly RawRow[]): UploadRow[][] => {
    const full: UploadRow[][] = [];
    for (const raw of raws) {
      if (read === null) {
        read = csvRowReader(raw, measures);
        continue;
      }
      count += 1;
      batch.push(read(raw, count));
      characters += raw.text.length;
      if (batch.length < options.batch.rows && characters < options.batch.characters) continue;
      full.push(batch);
      batch = [];
      characters = 0;
    }
    return full;
  };
  for await (const chunk of chunks) yield* take(splitter.push(chunk));
  yield* take(splitter.end());
  if (read === null) throw noHeader();
  if (batch.length > 0) yield batch;
}
