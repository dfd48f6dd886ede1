import {
  checkCharacterHolds,
  hasIssuedForm,
  isParticipantCode,
  looksLikeContactDetail,
} from '#core/allocation/participant-code.ts';
import type { Call, Principal } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { forgetAnswers } from '#platform/idempotency.ts';
import { cutPage, decodeCursor, type PageQuery, UUID_POSITION } from '#platform/paging.ts';
import { ProblemError } from '#platform/problems.ts';
import {
  type RegisteredProtocol,
  registeredProtocol,
  requireVisibleStudy,
  type Study,
} from '#server/studies/service.ts';
import {
  DEVIATIONS,
  type Deviation,
  type ParticipantResponse,
  WITHDRAWAL_REASONS,
} from './schemas.ts';
import * as store from './store-participants.ts';

const UUID = /^[0-9a-f]{8}(?:-[0-9a-f]{4}){3}-[0-9a-f]{12}$/;

/** Codes are compared without regard to case. */
export function codeKeyOf(code: string): string {
  return code.toUpperCase();
}

/**
 * A code that a person typed at a check-in, for somebody new.
 *
 * @throws {ProblemError} `code-not-pseudonymous` for what looks like a contact detail,
 *   `invalid-request` for what is no code, or reads as an id of the service
 */
export function requireCodeForm(code: string): void {
  requirePseudonym(code);
  if (isParticipantCode(code) && !UUID.test(code.toLowerCase())) return;
  throw new ProblemError('invalid-request', 'This is not a participant code.', {
    faults: [
      {
        pointer: '/code',
        code: 'pattern',
        message: '1 to 40 letters, digits, hyphens and underscores, and not a UUID.',
      },
    ],
  });
}

/** @throws {ProblemError} `code-not-pseudonymous`; the message does not repeat the code */
export function requirePseudonym(code: string): void {
  if (!looksLikeContactDetail(code)) return;
  throw new ProblemError(
    'code-not-pseudonymous',
    'The code looks like an e-mail address or telephone number. Use a pseudonym.',
  );
}

/**
 * The participant behind a code or id, within the caller's place: a participant of another site
 * does not exist for a station or coordinator.
 *
 * @throws {ProblemError} `participant-unknown`; `code-check-failed` when an unknown code has the
 *   form of those that the service issues and its check character does not hold, which is most
 *   likely a slip; `participant-erased`
 */
export async function requireParticipant(
  tx: SqlTransaction,
  study: Study,
  principal: Principal,
  codeOrId: string,
  how: 'read' | 'lock',
): Promise<store.ParticipantRow> {
  const id = codeOrId.toLowerCase();
  const by = UUID.test(id) ? { id } : { codeKey: codeKeyOf(codeOrId) };
  const row = await store.selectParticipant(tx, study.id, by, how);
  if (row !== null && (principal.siteId === null || principal.siteId === row.siteId)) {
    if (row.erasedAt === null) return row;
    throw new ProblemError('participant-erased', 'The participant was erased.');
  }
  if (hasIssuedForm(codeOrId) && !checkCharacterHolds(codeOrId)) {
    throw new ProblemError(
      'code-check-failed',
      'No participant has this code, and its last character does not fit: a character is wrong.',
    );
  }
  throw new ProblemError('participant-unknown', 'No participant with this code is known here.');
}

/** @throws {ProblemError} `participant-ended` */
export function requireOngoing(row: store.ParticipantRow): void {
  if (row.ending === null) return;
  throw new ProblemError(
    'participant-ended',
    row.ending === 'void' ? 'This check-in was voided.' : 'The participant has withdrawn.',
  );
}

/** Condition indices of a participant's sequence, by period. */
export function sequenceOf(registered: RegisteredProtocol, sequenceIndex: number) {
  const sequence = registered.set.sequences[sequenceIndex];
  if (sequence === undefined) throw new Error(`There is no sequence ${sequenceIndex}.`);
  return sequence;
}

/** The condition that a participant's sequence has in a period, counted from 1. */
export function conditionAt(registered: RegisteredProtocol, sequenceIndex: number, period: number) {
  const condition = registered.conditions[sequenceOf(registered, sequenceIndex)[period - 1] ?? -1];
  if (condition === undefined) throw new Error(`There is no period ${period}.`);
  return { key: condition.key, label: condition.label };
}

/** The visit, from 1, to which a period belongs. */
export function visitOf(registered: RegisteredProtocol, period: number): number {
  return registered.protocol.periods.visits.findIndex((visit) => visit.includes(period)) + 1;
}

/** Participants that the caller may see, a page at a time. @throws {ProblemError} `not-found` */
export function listParticipants(
  database: Database,
  call: Call,
  studyId: string,
  query: PageQuery,
) {
  return database.inSqlTransaction(async (tx) => {
    const study = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
    const rows = await store.selectParticipants(tx, {
      studyId: study.id,
      siteId: call.principal.siteId,
      after: decodeCursor(query.cursor, UUID_POSITION),
      limit: query.limit + 1,
    });
    const responses = await participantResponses(tx, study, call.principal, rows);
    return cutPage(
      responses,
      query.limit,
      (row) => row.id,
      (row) => row,
    );
  });
}

/** @throws {ProblemError} `not-found`, and as `requireParticipant` */
export function getParticipant(database: Database, call: Call, studyId: string, code: string) {
  return database.inSqlTransaction(async (tx) => {
    const study = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
    const row = await requireParticipant(tx, study, call.principal, code, 'read');
    return await participantResponse(tx, study, call.principal, row);
  });
}

export async function participantResponse(
  tx: SqlTransaction,
  study: Study,
  principal: Principal,
  row: store.ParticipantRow,
): Promise<ParticipantResponse> {
  const [response] = await participantResponses(tx, study, principal, [row]);
  if (response === undefined) throw new Error(`The participant ${row.id} is gone.`);
  return response;
}

async function participantResponses(
  tx: SqlTransaction,
  study: Study,
  principal: Principal,
  rows: readonly store.ParticipantRow[],
): Promise<ParticipantResponse[]> {
  const periods = periodsByParticipant(
    await store.selectPeriods(
      tx,
      rows.map((row) => row.id),
    ),
  );
  return await Promise.all(
    rows.map(async (row) => {
      const { id, code, siteId, slotNumber, stratum, protocolVersion, replacement } = row;
      return {
        id,
        code,
        siteId,
        slotNumber,
        stratum,
        protocolVersion,
        arrivedAt: row.arrivedAt.toISOString(),
        replacement,
        ending: endingOf(row),
        erasedAt: row.erasedAt?.toISOString() ?? null,
        // Whoever is bound to a site could count sequences there.
        sequence: principal.siteId === null ? await sequenceKeys(tx, study.id, row) : null,
        periods: (periods.get(id) ?? []).map((period) => ({
          period: period.period,
          startedAt: period.startedAt?.toISOString() ?? null,
          completedAt: period.completedAt?.toISOString() ?? null,
          deviations: deviationsOf(period),
        })),
      };
    }),
  );
}

/** Condition keys of a participant's sequence, by period. */
async function sequenceKeys(
  tx: SqlTransaction,
  studyId: string,
  row: Pick<store.ParticipantRow, 'protocolVersion' | 'sequenceIndex'>,
): Promise<string[]> {
  const registered = await registeredProtocol(sqlExecutor(tx), studyId, row.protocolVersion);
  return sequenceOf(registered, row.sequenceIndex).map(
    (condition) => registered.conditions[condition]?.key ?? '',
  );
}

function endingOf(row: store.ParticipantRow): ParticipantResponse['ending'] {
  if (row.ending === null || row.endedAt === null) return null;
  const at = row.endedAt.toISOString();
  if (row.ending === 'void') return { kind: 'void', at };
  const reasonCode = WITHDRAWAL_REASONS.find((known) => known === row.reasonCode);
  if (reasonCode === undefined || row.periodReached === null) {
    throw new Error(`The withdrawal of ${row.id} was recorded without its reason or period.`);
  }
  return { kind: 'withdrawn', at, reasonCode, periodReached: row.periodReached };
}

function deviationsOf(period: store.PeriodRow): Deviation[] {
  return DEVIATIONS.filter((deviation) => period.deviations.includes(deviation));
}

function periodsByParticipant(rows: readonly store.PeriodRow[]): Map<string, store.PeriodRow[]> {
  return Map.groupBy(rows, (row) => row.participantId);
}

// ---- for the features above --------------------------------------------------------------------

/** What a trial upload needs to know of a participant. */
export interface KnownParticipant {
  readonly id: string;
  readonly code: string;
  readonly siteId: string;
  readonly stratum: string;
  readonly protocolVersion: number;
  readonly slotNumber: number;
  /** Condition keys by period. */
  readonly sequence: readonly string[];
  readonly arrivedAt: Date;
  /** Set for those who withdrew; a voided check-in has no code any more, nor has an erased one. */
  readonly withdrawnAt: Date | null;
  /** The last period that somebody who withdrew had begun. */
  readonly periodReached: number | null;
}

/**
 * Participants of a study by code, whatever their site.
 *
 * @param codes in either case; those unknown are simply not in the answer
 * @returns by code key, the code in upper case
 */
export async function findParticipants(
  tx: SqlTransaction,
  studyId: string,
  codes: readonly string[],
): Promise<Map<string, KnownParticipant>> {
  const keys = [...new Set(codes.map(codeKeyOf))];
  const known = new Map<string, KnownParticipant>();
  for (const row of await store.selectParticipantsByCode(tx, studyId, keys)) {
    const { id, code, siteId, stratum, protocolVersion, slotNumber, arrivedAt, endedAt } = row;
    if (code === null) continue;
    known.set(row.codeKey, {
      id,
      code,
      siteId,
      stratum,
      protocolVersion,
      slotNumber,
      sequence: await sequenceKeys(tx, studyId, row),
      arrivedAt,
      withdrawnAt: endedAt,
      periodReached: row.periodReached,
    });
  }
  return known;
}

/** Codes of a study's participants by id; a voided or erased participant has none. */
export async function participantCodes(
  tx: SqlTransaction,
  studyId: string,
): Promise<Map<string, string>> {
  const filter = { studyId, siteId: null, after: null, limit: null };
  const codes = new Map<string, string>();
  for (const { id, code } of await store.selectParticipants(tx, filter)) {
    if (code !== null) codes.set(id, code);
  }
  return codes;
}

/**
 * Notes that a trial of a period is there, whether or not its start was noted: from then on the
 * check-in cannot be voided. The participants cannot be ended until the transaction is over, so
 * this comes late in it.
 *
 * @throws {ProblemError} `participant-ended` when a check-in was voided in the meantime
 */
export async function markPeriodsBegun(
  tx: SqlTransaction,
  begun: readonly { readonly participantId: string; readonly period: number }[],
): Promise<void> {
  if (begun.length === 0) return;
  const ids = [...new Set(begun.map((row) => row.participantId))].sort();
  if ((await store.selectVoidedForShare(tx, ids)).length > 0) {
    throw new ProblemError('participant-ended', 'A check-in was voided in the meantime.');
  }
  await store.insertPeriodsBegun(tx, begun);
}

/** Notes that every planned trial of a period is there; the first such time stays. */
export async function markPeriodsCompleted(
  tx: SqlTransaction,
  completed: readonly {
    readonly participantId: string;
    readonly period: number;
    readonly at: Date;
  }[],
): Promise<void> {
  if (completed.length > 0) await store.upsertPeriodsCompleted(tx, completed);
}

/** A participant's passage through the study, without code or measured value. */
export interface ParticipantRecord {
  readonly id: string;
  readonly siteId: string;
  readonly stratum: string;
  readonly protocolVersion: number;
  readonly slotNumber: number;
  /** Whether somebody had withdrawn from the slot before. */
  readonly replacement: boolean;
  /** Condition keys by period, as assigned. */
  readonly sequence: readonly string[];
  readonly arrivedAt: Date;
  readonly erasedAt: Date | null;
  readonly ending:
    | {
        readonly kind: 'withdrawn';
        readonly at: Date;
        readonly reasonCode: string;
        readonly periodReached: number;
      }
    | { readonly kind: 'void'; readonly at: Date }
    | null;
  /** Ascending; a period neither started nor completed is absent. */
  readonly periods: readonly {
    readonly period: number;
    readonly startedAt: Date | null;
    readonly completedAt: Date | null;
    readonly deviations: readonly string[];
  }[];
}

/** Everybody who ever occupied a slot of the study, in the order of arrival. */
export async function participantRecords(
  tx: SqlTransaction,
  studyId: string,
): Promise<ParticipantRecord[]> {
  const filter = { studyId, siteId: null, after: null, limit: null };
  const rows = await store.selectParticipants(tx, filter);
  const periods = periodsByParticipant(await store.selectStudyPeriods(tx, studyId));
  const records: ParticipantRecord[] = [];
  for (const row of rows) {
    const { id, siteId, stratum, protocolVersion, slotNumber, replacement } = row;
    const ending = endingOf(row);
    records.push({
      id,
      siteId,
      stratum,
      protocolVersion,
      slotNumber,
      replacement,
      sequence: await sequenceKeys(tx, studyId, row),
      arrivedAt: row.arrivedAt,
      erasedAt: row.erasedAt,
      ending: ending === null ? null : { ...ending, at: new Date(ending.at) },
      periods: periods.get(id) ?? [],
    });
  }
  return records;
}

/**
 * Erases what allocations hold of a participant: the code, and the kept answers to requests about
 * the participant. The tombstone stays: slot, site, stratum, times. Whoever erases trials too does
 * so in the same transaction, and appends the one audit entry.
 */
export async function eraseParticipantRecords(
  tx: SqlTransaction,
  participantId: string,
  at: Date,
): Promise<void> {
  await store.deleteCode(tx, participantId);
  await store.updateErased(tx, participantId, at);
  await forgetAnswers(sqlExecutor(tx), participantId);
}
