import { randomBytes } from 'node:crypto';
import { keyedChance } from '#core/allocation/keyed-draw.ts';
import { emptyLedger, issueNext, recordIssued } from '#core/allocation/ledger.ts';
import { issueParticipantCode } from '#core/allocation/participant-code.ts';
import { assert } from '#core/errors.ts';
import { SINGLE_STRATUM } from '#core/protocol/strata.ts';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { type Answer, once } from '#platform/idempotency.ts';
import { uuidv7 } from '#platform/ids.ts';
import { type Fault, ProblemError } from '#platform/problems.ts';
import { appendEntry, commitTo } from '#server/audit/log.ts';
import {
  allocationSecretOf,
  lockVisibleStudy,
  type RegisteredProtocol,
  registeredProtocol,
  requireVisibleStudy,
  type Study,
  studySites,
  takeSlotNumbers,
} from '#server/studies/service.ts';
import { allocationPlanOf } from './allocation-plan.ts';
import {
  codeKeyOf,
  conditionAt,
  requireCodeForm,
  requireOngoing,
  requireParticipant,
  requirePseudonym,
  visitOf,
} from './participants.ts';
import { type ArrivalBody, ArrivalResponse } from './schemas.ts';
import * as participantStore from './store-participants.ts';
import * as store from './store-slots.ts';

type NewArrival = Extract<ArrivalBody, { kind: 'new' }>;

/** Issued codes come from 1.6·10^10; so many clashes in a row mean that something is broken. */
const CODE_TRIES = 100;

/**
 * A participant presents at the station of the call. Somebody new gets a slot, serially: the study
 * stays locked until the transaction ends. Somebody returning gets the same answer as before.
 *
 * A vacated slot of the site and stratum goes first: one of a voided check-in before one of a
 * withdrawal (if the protocol replaces those), then the lowest number. Only slots of the version in
 * force are taken over: after an amendment nobody new is run under the old protocol. What stood
 * vacant then lapses, keeps its number and no longer counts towards the target of the site.
 *
 * Audit event `slot-allocated`, with a commitment to the code.
 *
 * @throws {ProblemError} `missing-idempotency-key` for somebody new, `not-found`, `wrong-state`,
 *   `site-not-in-study`, `site-full`, `stratum-unknown`, `code-not-pseudonymous`,
 *   `participant-known`; for somebody returning `participant-unknown`, `code-check-failed`,
 *   `participant-ended`
 */
export function recordArrival(
  database: Database,
  call: Call,
  studyId: string,
  body: ArrivalBody,
): Promise<Answer<ArrivalResponse>> {
  if (body.kind === 'returning') return returningArrival(database, call, studyId, body.code);
  if (call.idempotency === null) {
    throw new ProblemError(
      'missing-idempotency-key',
      'Send an Idempotency-Key, so that a repeat after a lost answer is not a second person.',
    );
  }
  if (body.code !== undefined) requireCodeForm(body.code);
  return database.inSqlTransaction(async (tx) => {
    const executor = sqlExecutor(tx);
    const study = await lockVisibleStudy(executor, call.principal, studyId);
    const answer = await once(executor, call, {
      parse: (stored) => ArrivalResponse.parse(stored),
      // The code lives in its erasable row alone.
      keep: (kept) => ({ ...kept, participant: { ...kept.participant, code: '' } }),
      work: async () => {
        const created = await allocate(tx, call, study, body);
        return { status: 201, body: created, participantId: created.participant.id };
      },
    });
    return answer.repeated ? { ...answer, body: await withCode(tx, study, answer.body) } : answer;
  });
}

function returningArrival(database: Database, call: Call, studyId: string, code: string) {
  requirePseudonym(code);
  return database.inSqlTransaction(async (tx) => {
    const study = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
    const row = await requireParticipant(tx, study, call.principal, code, 'read');
    requireOngoing(row);
    const registered = await registeredProtocol(sqlExecutor(tx), study.id, row.protocolVersion);
    return { status: 200, body: await arrivalResponse(tx, registered, row), repeated: false };
  });
}

async function allocate(
  tx: SqlTransaction,
  call: Call,
  study: Study,
  body: NewArrival,
): Promise<ArrivalResponse> {
  if (study.state !== 'enrolling' || study.currentVersion === null) {
    throw new ProblemError('wrong-state', `The study is ${study.state}: nobody new is taken.`);
  }
  const executor = sqlExecutor(tx);
  const registered = await registeredProtocol(executor, study.id, study.currentVersion);
  const cell = {
    studyId: study.id,
    protocolVersion: registered.number,
    siteId: requireOwnSite(call, registered),
    stratum: stratumOf(registered, body.stratum ?? {}),
  };
  const code = await freeCode(tx, study.id, body.code);
  const slot = (await store.selectVacantSlot(tx, cell, replacesWithdrawn(registered))) ?? {
    ...(await issueSlot(tx, call, registered, cell)),
    occupiedAt: null,
    withdrawn: false,
  };
  const id = uuidv7();
  await store.insertParticipant(tx, {
    id,
    studyId: study.id,
    siteId: cell.siteId,
    stratum: cell.stratum,
    code,
    codeKey: codeKeyOf(code),
    arrivedAt: laterThan(slot.occupiedAt, call.now),
    slotId: slot.id,
    stationId: call.principal.stationId,
    operator: call.operator,
  });
  await appendEntry(executor, {
    chain: study.id,
    actor: actorOf(call),
    action: 'slot-allocated',
    subject: id,
    details: {
      code: await commitTo(executor, code, { studyId: study.id, participantId: id }),
      codeIssued: body.code === undefined,
      issueNumber: slot.issueNumber,
      protocolVersion: cell.protocolVersion,
      replacement: slot.withdrawn,
      siteId: cell.siteId,
      slotNumber: slot.number,
      stratum: cell.stratum,
      takenOver: slot.occupiedAt !== null,
    },
    at: call.now,
  });
  const row = await participantStore.selectParticipant(tx, study.id, { id }, 'read');
  assert(row !== null, 'a participant who was just inserted is there');
  return await arrivalResponse(tx, registered, row);
}

/** @throws {ProblemError} `site-not-in-study` when the version in force leaves the site out */
function requireOwnSite(call: Call, registered: RegisteredProtocol): string {
  const { siteId } = call.principal;
  assert(siteId !== null, 'only stations record arrivals, and each belongs to a site');
  if (registered.protocol.sites.some((site) => site.siteId === siteId)) return siteId;
  throw new ProblemError(
    'site-not-in-study',
    'The protocol version in force leaves this site out: who began here may finish here.',
  );
}

/** Occupancies of one slot follow one another in time, also when two servers' clocks differ. */
function laterThan(before: Date | null, now: Date): Date {
  return before === null || before < now ? now : new Date(before.getTime() + 1);
}

/** @throws {ProblemError} `stratum-unknown`, naming each factor that is wrong */
function stratumOf(
  registered: RegisteredProtocol,
  given: Readonly<Record<string, string>>,
): string {
  const { betweenFactors } = registered.protocol;
  const faults: Fault[] = [];
  for (const { key, levels } of betweenFactors) {
    const known = levels.map((level) => level.key);
    const level = Object.hasOwn(given, key) ? given[key] : undefined;
    if (level !== undefined && known.includes(level)) continue;
    faults.push({
      pointer: `/stratum/${key}`,
      code: level === undefined ? 'required' : 'unknown-level',
      message: `The factor "${key}" has the levels ${known.join(', ')}.`,
      expected: known.join(', '),
    });
  }
  for (const [index, key] of Object.keys(given).entries()) {
    if (betweenFactors.some((factor) => factor.key === key)) continue;
    const message = `Number ${index + 1} in the stratum is no between factor of the protocol.`;
    faults.push({ pointer: '/stratum', code: 'unknown-factor', message });
  }
  if (faults.length > 0) {
    throw new ProblemError('stratum-unknown', 'The protocol has no such stratum.', { faults });
  }
  return betweenFactors.map(({ key }) => given[key]).join('.') || SINGLE_STRATUM;
}

/** @throws {ProblemError} `participant-known`, whatever the site of the other participant */
async function freeCode(
  tx: SqlTransaction,
  studyId: string,
  typed: string | undefined,
): Promise<string> {
  if (typed !== undefined) {
    if (!(await store.selectCodeExists(tx, studyId, codeKeyOf(typed)))) return typed;
    throw new ProblemError(
      'participant-known',
      'A participant with this code has arrived already. Check in as returning, or use another.',
    );
  }
  for (let tries = 0; tries < CODE_TRIES; tries += 1) {
    const code = issueParticipantCode((count) => randomBytes(count));
    if (!(await store.selectCodeExists(tx, studyId, codeKeyOf(code)))) return code;
  }
  throw new Error('No free participant code was found.');
}

function replacesWithdrawn(registered: RegisteredProtocol): boolean {
  return registered.protocol.replacement.kind === 'same-site';
}

/** The next slot of the site, with the sequence that the policy gives it. @throws `site-full` */
async function issueSlot(
  tx: SqlTransaction,
  call: Call,
  registered: RegisteredProtocol,
  cell: store.Cell,
): Promise<store.NewSlot> {
  const executor = sqlExecutor(tx);
  const { studyId, siteId, stratum } = cell;
  const site = (await studySites(executor, studyId)).find((one) => one.siteId === siteId);
  assert(site !== undefined, 'a site that sees the study has its row in it');
  if (site.slotsIssued >= site.targetEnrolment) {
    const lapsed = await store.countLapsedSlots(tx, cell, replacesWithdrawn(registered));
    if (site.slotsIssued - lapsed >= site.targetEnrolment) {
      throw new ProblemError('site-full', 'The site has issued all the slots that it planned.');
    }
  }
  const { protocolVersion } = cell;
  const secret = await allocationSecretOf(executor, studyId);
  const plan = allocationPlanOf(registered);
  const ledger = emptyLedger(plan, keyedChance({ secret, studyId, protocolVersion }));
  for (const row of await store.selectSequenceCounts(tx, studyId, protocolVersion)) {
    recordIssued(ledger, { ...row, count: row.issued });
  }
  const { number, issueNumber } = await takeSlotNumbers(executor, studyId, siteId);
  const { sequenceIndex, drawsUsed } = issueNext(ledger, { siteId, stratum, slotNumber: number });
  const slot = {
    ...cell,
    id: uuidv7(),
    number,
    issueNumber,
    sequenceIndex,
    draws: drawsUsed,
    issuedAt: call.now,
  };
  await store.insertSlot(tx, slot);
  return slot;
}

/** The first answer, with the code from where it is kept. */
async function withCode(
  tx: SqlTransaction,
  study: Study,
  answer: ArrivalResponse,
): Promise<ArrivalResponse> {
  const { id } = answer.participant;
  const row = await participantStore.selectParticipant(tx, study.id, { id }, 'read');
  if (row === null || row.code === null) {
    throw new ProblemError('participant-ended', 'This check-in was voided since.');
  }
  return { ...answer, participant: { id, code: row.code } };
}

async function arrivalResponse(
  tx: SqlTransaction,
  registered: RegisteredProtocol,
  row: participantStore.ParticipantRow,
): Promise<ArrivalResponse> {
  const { id, code, siteId, slotNumber, stratum, protocolVersion, replacement } = row;
  assert(code !== null, 'a participant who takes part has a code');
  const states = await participantStore.selectPeriods(tx, [id]);
  const { count, washout } = registered.protocol.periods;
  return {
    participant: { id, code },
    siteId,
    slotNumber,
    stratum,
    protocolVersion,
    arrivedAt: row.arrivedAt.toISOString(),
    replacement,
    washout,
    periods: Array.from({ length: count }, (_, index) => {
      const period = index + 1;
      const state = states.find((one) => one.period === period);
      return {
        period,
        visit: visitOf(registered, period),
        condition: conditionAt(registered, row.sequenceIndex, period),
        startedAt: state?.startedAt?.toISOString() ?? null,
        completedAt: state?.completedAt?.toISOString() ?? null,
      };
    }),
  };
}
