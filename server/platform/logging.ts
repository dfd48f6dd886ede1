import { type DestinationStream, type Logger, pino } from 'pino';
import type { LogLevel } from './config.ts';

export interface LoggerOptions {
  readonly level: LogLevel;
  /** Values that must never be logged, such as the database password; may grow while running. */
  readonly secrets?: Set<string>;
  /** Standard output when absent. */
  readonly destination?: DestinationStream;
}

const HIDDEN = '[hidden]';

const SECRET_KEYS =
  'authorization|proxy-authorization|cookie|set-cookie|password|passphrase|token|secret|salt|' +
  'privateKey|databaseUrl|DATABASE_URL';
/** A JSON string after one of these keys, whatever it holds. */
const SECRET_FIELD = new RegExp(`("(?:${SECRET_KEYS})":)"(?:[^"\\\\]|\\\\.)*"`, 'gi');
/** The service's own tokens, wherever they stand. */
const TOKEN = /fairturn_[\w-]{20,}/g;
const BEARER = /\b(bearer|basic)\s+[\w.~+/=-]+/gi;
/** Account and password of a URL. */
const URL_PASSWORD = /(:\/\/[^\s:/@"\\]*):[^\s@"\\]+@/g;

/**
 * The service's logger: one JSON object a line. Requests bring their id (`reqId`) through Fastify.
 *
 * Secrets are taken out of the finished line, not out of named fields, since they also come inside
 * messages and errors of libraries, at places that nobody foresaw.
 */
export function createLogger({ level, secrets, destination }: LoggerOptions): Logger {
  const options = {
    level,
    base: null,
    timestamp: pino.stdTimeFunctions.isoTime,
    hooks: { streamWrite: (line: string) => hideSecrets(line, secrets ?? new Set()) },
  };
  return destination === undefined ? pino(options) : pino(options, destination);
}

/** A log line with every token, password and known secret taken out; still JSON. */
export function hideSecrets(line: string, secrets: ReadonlySet<string>): string {
  let clean = line
    .replace(SECRET_FIELD, `$1"${HIDDEN}"`)
    .replace(TOKEN, HIDDEN)
    .replace(BEARER, `$1 ${HIDDEN}`)
    .replace(URL_PASSWORD, `$1:${HIDDEN}@`);
  for (const secret of secrets) {
    // As it stands inside a JSON string.
    if (secret !== '') clean = clean.replaceAll(JSON.stringify(secret).slice(1, -1), HIDDEN);
  }
  return clean;
}
