import type { Response } from 'supertest';
import type { Caller } from './app.ts';

/** Somebody checked in, with the conditions of the sequence by period. */
export interface Person {
  readonly id: string;
  readonly code: string;
  readonly conditions: readonly string[];
}

/** The person whom an answer to an arrival speaks of. */
export function personOf(arrival: Response): Person {
  if (arrival.status !== 201) throw new Error(`no arrival: ${arrival.text}`);
  const periods: { condition: { key: string } }[] = arrival.body.periods;
  const conditions = periods.map(({ condition }) => condition.key);
  return { ...arrival.body.participant, conditions };
}

/** A row of the example protocol, with what is given put in place. */
export interface Row {
  [field: string]: unknown;
  participant: string;
  period: number;
  repetition: number;
  condition: string;
  recordId: string;
  values: Record<string, unknown>;
  missing: Record<string, unknown>;
  startedAt: string;
}

/** An invented, faultless record; the record id says where it stands. */
export function rowOf(
  person: Person,
  period: number,
  repetition: number,
  changed: Partial<Row> = {},
): Row {
  return {
    participant: person.code,
    period,
    repetition,
    condition: person.conditions[period - 1] ?? '',
    recordId: `${person.id}-${period}-${repetition}`,
    values: {
      'pegboard-time': 20 + period + repetition / 10,
      'pegs-dropped': 1,
      'part-misseated': false,
      ...(repetition === 1 ? { 'hand-comfort': 4 } : {}),
    },
    missing: {},
    startedAt: `2026-03-02T0${5 + period}:0${repetition}:00+01:00`,
    ...changed,
  };
}

/** Every planned record of a person: four periods of three repetitions. */
export function allRowsOf(person: Person): Row[] {
  return [1, 2, 3, 4].flatMap((period) =>
    [1, 2, 3].map((repetition) => rowOf(person, period, repetition)),
  );
}

export function upload(
  station: Caller,
  studyId: string,
  rows: unknown,
  options: { acceptance?: 'valid-rows'; key?: string } = {},
): Promise<Response> {
  const query = options.acceptance === undefined ? '' : `?acceptance=${options.acceptance}`;
  const key = options.key === undefined ? {} : { 'idempotency-key': options.key };
  return station.post(`/v1/studies/${studyId}/uploads${query}`, JSON.stringify(rows), {
    'content-type': 'application/json',
    ...key,
  });
}

/** The faults of an answer as `row pointer code`, for comparing at a glance. */
export function faultsOf(answer: Response): string[] {
  const faults: { row: number; pointer: string; code: string }[] = answer.body.faults ?? [];
  return faults.map(({ row, pointer, code }) => `${row} ${pointer} ${code}`);
}
