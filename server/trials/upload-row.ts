/** One thing wrong with a row: where in it (RFC 6901 pointer), what, and in words. */
export interface RowFault {
  readonly pointer: string;
  readonly code: string;
  /** Never repeats what stood in the row: that may be a code or a value. */
  readonly message: string;
}

/** A row as cut out of the body, before it is read; the fault is why it cannot be. */
export interface RawRow {
  readonly text: string;
  readonly fault: RowFault | null;
}

/** Cuts a body into rows, wherever its chunks begin and end. */
export interface RowSplitter {
  /** Rows that this chunk completes. The chunk may be overwritten afterwards. */
  push(chunk: Buffer): RawRow[];
  /** What is left at the end of the body. */
  end(): RawRow[];
}

/** A trial record as it came, every field of its type and not yet compared with any protocol. */
export interface TrialFields {
  readonly participant: string;
  readonly period: number;
  readonly repetition: number;
  readonly condition: string;
  readonly recordId: string;
  /** By measure key; what is absent or null in the row is absent here. */
  readonly values: ReadonlyMap<string, number | boolean>;
  /** Reason code by measure key. */
  readonly missing: ReadonlyMap<string, string>;
  readonly startedAt: string;
  readonly endedAt: string | null;
  readonly note: string | null;
}

/** A row read: its fields, or what keeps it from being a trial record. */
export interface UploadRow {
  /** From 1 over the data rows of an upload. */
  readonly number: number;
  readonly text: string;
  /** Also known when other fields are at fault, so that a refused row can be erased. */
  readonly participant: string | null;
  readonly fields: TrialFields | null;
  readonly faults: readonly RowFault[];
}

/** A row longer than this is refused, and kept only so far. */
export const ROW_BYTES_MAX = 65_536;

export const ROW_TOO_LONG: RowFault = {
  pointer: '',
  code: 'row-too-long',
  message: `A row may have ${ROW_BYTES_MAX} bytes; of this one only so many were kept.`,
};

/** Escapes one token of a JSON pointer (RFC 6901 §3). */
export function pointerToken(name: string): string {
  return name.replaceAll('~', '~0').replaceAll('/', '~1');
}
