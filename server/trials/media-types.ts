import { ProblemError } from '#platform/problems.ts';
import { EXPORT_MEDIA_TYPES, type ExportMediaType } from './exports.ts';
import { UPLOAD_MEDIA_TYPES, type UploadMediaType } from './read-rows.ts';

/**
 * The media type of an upload, by its headers.
 *
 * @throws {ProblemError} `unsupported-media-type` for another type, another charset than UTF-8, a
 *   compressed body, or CSV that says it has no header
 */
export function uploadMediaType(headers: {
  readonly contentType: string | undefined;
  readonly contentEncoding: string | undefined;
}): UploadMediaType {
  const [essence = '', ...parameters] = (headers.contentType ?? '')
    .split(';')
    .map((part) => part.trim().toLowerCase());
  const known = UPLOAD_MEDIA_TYPES.find((type) => type === essence);
  if (known === undefined) {
    throw unsupported(`An upload is ${UPLOAD_MEDIA_TYPES.join(', ')}.`);
  }
  const charset = parameterOf(parameters, 'charset');
  if (charset !== null && charset !== 'utf-8' && charset !== 'us-ascii') {
    throw unsupported('An upload is read as UTF-8 and in no other charset.');
  }
  // RFC 4180 section 3: the optional parameter "header" of text/csv.
  if (parameterOf(parameters, 'header') === 'absent') {
    throw unsupported('CSV needs a header that names its columns.');
  }
  const encoding = headers.contentEncoding?.trim().toLowerCase() ?? 'identity';
  if (encoding !== 'identity') throw unsupported('An upload is read uncompressed.');
  return known;
}

function parameterOf(parameters: readonly string[], name: string): string | null {
  const found = parameters.find((parameter) => parameter.startsWith(`${name}=`));
  return found === undefined ? null : found.slice(name.length + 1).replaceAll('"', '');
}

function unsupported(detail: string): ProblemError {
  return new ProblemError('unsupported-media-type', detail);
}

/**
 * The media type of an export that an Accept header likes best (RFC 9110 section 12.5.1);
 * newline-delimited JSON where it has no preference.
 *
 * @throws {ProblemError} `not-acceptable` when it wants neither
 */
export function exportMediaType(accept: string | undefined): ExportMediaType {
  const ranges = (accept ?? '*/*').split(',').map(mediaRange);
  const liked = EXPORT_MEDIA_TYPES.map((type) => ({ type, quality: qualityOf(type, ranges) }));
  const best = liked.toSorted((a, b) => b.quality - a.quality)[0];
  if (best !== undefined && best.quality > 0) return best.type;
  throw new ProblemError(
    'not-acceptable',
    `An export is ${EXPORT_MEDIA_TYPES.join(' or ')}; the Accept header wants neither.`,
  );
}

interface MediaRange {
  readonly range: string;
  readonly quality: number;
}

function mediaRange(text: string): MediaRange {
  const [range = '', ...parameters] = text.split(';').map((part) => part.trim().toLowerCase());
  const quality = Number(parameterOf(parameters, 'q') ?? '1');
  return { range, quality: Number.isNaN(quality) ? 0 : quality };
}

/** The most precise range that covers a type decides. */
function qualityOf(type: string, ranges: readonly MediaRange[]): number {
  const covering = [type, `${type.split('/')[0]}/*`, '*/*'];
  for (const wanted of covering) {
    const found = ranges.find(({ range }) => range === wanted);
    if (found !== undefined) return found.quality;
  }
  return 0;
}
