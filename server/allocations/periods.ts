import { duePeriod, type PeriodStart } from '#core/allocation/washout.ts';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { type Answer, once } from '#platform/idempotency.ts';
import { ProblemError } from '#platform/problems.ts';
import { appendEntry, commitTo } from '#server/audit/log.ts';
import {
  type RegisteredProtocol,
  registeredProtocol,
  requireVisibleStudy,
  type Study,
} from '#server/studies/service.ts';
import { conditionAt, requireOngoing, requireParticipant, visitOf } from './participants.ts';
import { reportedTime } from './reported-time.ts';
import {
  type Deviation,
  type DuePeriodResponse,
  type PeriodStartBody,
  PeriodStartResponse,
} from './schemas.ts';
import * as store from './store-participants.ts';

/**
 * What is due for a participant at this site, whichever station asks.
 *
 * @throws {ProblemError} `not-found`, `participant-ended`, and as `requireParticipant`
 */
export function getDuePeriod(
  database: Database,
  call: Call,
  studyId: string,
  code: string,
): Promise<DuePeriodResponse> {
  return database.inSqlTransaction(async (tx) => {
    const study = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
    const row = await requireParticipant(tx, study, call.principal, code, 'read');
    requireOngoing(row);
    const registered = await registeredProtocol(sqlExecutor(tx), study.id, row.protocolVersion);
    const plan = registered.protocol.periods;
    const starts = startsOf(await store.selectPeriods(tx, [row.id]));
    const due = duePeriod(plan, starts, call.now.getTime());
    const finished = due.state === 'finished';
    return {
      participant: { id: row.id, code: row.code ?? '' },
      state: due.state,
      period: finished ? null : due.period,
      visit: finished ? null : due.visit,
      condition: finished ? null : conditionAt(registered, row.sequenceIndex, due.period),
      dueFrom: finished ? null : isoOf(due.earliestMs),
      dueUntil: finished ? null : isoOf(due.latestMs),
      washout: plan.washout,
      judgedAt: call.now.toISOString(),
    };
  });
}

/**
 * Notes that a period begins, or began when the station was offline. Whether it was due is judged
 * at that time, by what had begun before it. Out of turn, too early or too late it is recorded only
 * with a reason, as a deviation. A start that happened before a withdrawal and is reported after it
 * is kept. Audit event `period-started`, with a commitment to the reason.
 *
 * @throws {ProblemError} `not-found`, `participant-ended`, `period-already-started`,
 *   `period-not-due`, `invalid-request` for a period that the sequence does not have or a time that
 *   cannot be, and as `requireParticipant`
 */
export function startPeriod(
  database: Database,
  call: Call,
  studyId: string,
  code: string,
  body: PeriodStartBody,
): Promise<Answer<PeriodStartResponse>> {
  return database.inSqlTransaction(async (tx) => {
    const executor = sqlExecutor(tx);
    const study = await requireVisibleStudy(executor, call.principal, studyId);
    return await once(executor, call, {
      parse: (stored) => PeriodStartResponse.parse(stored),
      work: async () => {
        const row = await requireParticipant(tx, study, call.principal, code, 'lock');
        const started = await start(tx, call, study, row, body);
        return { status: 201, body: started, participantId: row.id };
      },
    });
  });
}

async function start(
  tx: SqlTransaction,
  call: Call,
  study: Study,
  row: store.ParticipantRow,
  body: PeriodStartBody,
): Promise<PeriodStartResponse> {
  const executor = sqlExecutor(tx);
  const { period } = body;
  const startedAt = reportedTime('startedAt', body.startedAt, call.now, row.arrivedAt);
  const isBeforeWithdrawal =
    row.ending === 'withdrawn' && row.endedAt !== null && startedAt < row.endedAt;
  if (!isBeforeWithdrawal) requireOngoing(row);
  const registered = await registeredProtocol(executor, study.id, row.protocolVersion);
  requirePeriod(registered, period);
  const states = await store.selectPeriods(tx, [row.id]);
  if (states.some((state) => state.period === period && state.startedAt !== null)) {
    throw new ProblemError('period-already-started', `Period ${period} was started already.`);
  }
  const deviations = deviationsAt(registered, states, period, startedAt);
  if (deviations.length > 0 && body.deviation === undefined) {
    throw new ProblemError(
      'period-not-due',
      `Period ${period} is ${deviations.join(' and ')}. To start it all the same, give a reason.`,
      { faults: deviations.map((code) => ({ pointer: '/period', code, message: MEANING[code] })) },
    );
  }
  const { stationId } = call.principal;
  const { operator } = call;
  const participantId = row.id;
  await store.upsertPeriodStart(tx, {
    participantId,
    period,
    startedAt,
    stationId,
    operator,
    deviations,
  });
  const owner = { studyId: study.id, participantId };
  const reason =
    body.deviation === undefined ? null : await commitTo(executor, body.deviation.reason, owner);
  await appendEntry(executor, {
    chain: study.id,
    actor: actorOf(call),
    action: 'period-started',
    subject: participantId,
    details: { deviations, period, reason, startedAt: startedAt.toISOString() },
    at: call.now,
  });
  return {
    participantId,
    period,
    visit: visitOf(registered, period),
    condition: conditionAt(registered, row.sequenceIndex, period),
    startedAt: startedAt.toISOString(),
    deviations,
  };
}

const MEANING: Readonly<Record<Deviation, string>> = {
  'out-of-turn': 'Another period of the sequence comes first.',
  'too-early': 'The minimum of the washout has not passed.',
  'too-late': 'The maximum of the washout has passed.',
};

function requirePeriod(registered: RegisteredProtocol, period: number): void {
  const { count } = registered.protocol.periods;
  if (period <= count) return;
  throw new ProblemError('invalid-request', `The sequence has ${count} periods.`, {
    faults: [
      { pointer: '/period', code: 'unknown-period', message: `Must be from 1 to ${count}.` },
    ],
  });
}

/** How starting a period at a time differs from the protocol, by what had begun before. */
function deviationsAt(
  registered: RegisteredProtocol,
  states: readonly store.PeriodRow[],
  period: number,
  startedAt: Date,
): Deviation[] {
  const atMs = startedAt.getTime();
  const others = states.filter((state) => state.period !== period);
  const before = startsOf(others).filter((begun) => begun.startedAtMs <= atMs);
  const due = duePeriod(registered.protocol.periods, before, atMs);
  if (due.state === 'finished') throw new Error('A period not yet started cannot be finished.');
  const deviations: Deviation[] = [];
  if (due.period !== period) deviations.push('out-of-turn');
  if (due.state !== 'due') deviations.push(due.state);
  return deviations;
}

/** A period whose data came in without a start being noted began at the latest when they did. */
function startsOf(states: readonly store.PeriodRow[]): PeriodStart[] {
  return states.flatMap(({ period, startedAt, completedAt }) => {
    const begun = startedAt ?? completedAt;
    return begun === null ? [] : [{ period, startedAtMs: begun.getTime() }];
  });
}

function isoOf(ms: number | null): string | null {
  return ms === null ? null : new Date(ms).toISOString();
}
