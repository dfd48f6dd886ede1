import type postgres from 'postgres';

/** Characters that COPY's text format writes with a backslash. */
const SPECIAL = /[\\\b\f\n\r\t\v]/g;

const ESCAPES: Readonly<Record<string, string>> = {
  '\\': '\\\\',
  '\b': '\\b',
  '\f': '\\f',
  '\n': '\\n',
  '\r': '\\r',
  '\t': '\\t',
  '\v': '\\v',
};

/** One row in the text format of PostgreSQL's COPY; null is NULL. */
export function copyRow(fields: readonly (string | null)[]): string {
  return `${fields.map(copyField).join('\t')}\n`;
}

/** A text that may hold any character but NUL. */
export function copyField(text: string | null): string {
  if (text === null) return '\\N';
  return text.replace(SPECIAL, (character) => ESCAPES[character] ?? character);
}

/**
 * Runs a `copy … from stdin` with these rows and waits until PostgreSQL has taken or refused them.
 *
 * The driver settles the query as soon as the COPY begins, and loses what PostgreSQL says after the
 * last row, where most constraints are checked: its stream then never ends. That error still comes
 * to the query's own `reject`, and from there to the caller.
 */
export function copyRows(
  query: postgres.PendingQuery<postgres.Row[]>,
  text: string,
): Promise<void> {
  return new Promise((resolve, reject) => {
    const settle: unknown = Reflect.get(query, 'reject');
    const refuse = (error: unknown): void => {
      if (typeof settle === 'function') settle(error);
      reject(error);
    };
    Reflect.set(query, 'reject', refuse);
    query.writable().then((stream) => {
      stream.on('error', reject);
      stream.on('finish', resolve);
      stream.end(text);
    }, reject);
  });
}
