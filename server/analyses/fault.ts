/** Where something broke, fit for logs and for the queue's tables. */
export interface Fault {
  readonly name: string;
  /** SQLSTATE or the code of a system error, when there is one. */
  readonly code: string | null;
  readonly frames: readonly string[];
}

/**
 * An error without its message and without the fields that drivers attach: a core function may
 * quote the measured value it was given, and PostgreSQL quotes the failing row.
 */
export function faultOf(error: unknown): Fault {
  if (!(error instanceof Error)) return { name: typeof error, code: null, frames: [] };
  const frames = (error.stack ?? '').split('\n').filter((line) => /^\s+at /.test(line));
  const code = 'code' in error && typeof error.code === 'string' ? error.code : null;
  return { name: error.name, code, frames: frames.map((line) => line.trim()) };
}
