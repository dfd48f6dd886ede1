import { randomBytes } from 'node:crypto';
import { canonicalJson, type JsonValue } from '#core/hashing/canonical-json.ts';
import { saltedCommitment } from '#core/hashing/digest.ts';
import type { Actor } from '#platform/call.ts';
import type { Executor } from '#platform/database.ts';
import * as store from './store.ts';

/** What one audit entry says. `details` holds commitments where a personal value would stand. */
export interface AuditEvent {
  /** `administration`, or the id of a study. */
  readonly chain: string;
  readonly actor: Actor;
  /** What was done, past tense in kebab case: `protocol-registered`. */
  readonly action: string;
  /** What it was done to, by id. */
  readonly subject: string;
  readonly details: { readonly [key: string]: JsonValue };
  readonly at: Date;
}

/**
 * Appends an entry in the transaction of the change it records. The chain stays locked until that
 * transaction ends: append last, and a study's chain before `administration`.
 */
export async function appendEntry(
  executor: Executor,
  event: AuditEvent,
): Promise<{ number: number; hash: string }> {
  const content = canonicalJson({
    action: event.action,
    actor: { ...event.actor },
    at: event.at.toISOString(),
    details: event.details,
    subject: event.subject,
  });
  return await store.insertEntry(executor, event.chain, content, event.at);
}

/**
 * A salted commitment to a personal value or free text, for use in an entry's details. What opens
 * it is kept in an erasable row.
 */
export async function commitTo(
  executor: Executor,
  value: JsonValue,
  owner: { studyId: string | null; participantId: string | null },
): Promise<string> {
  const salt = randomBytes(16);
  const commitment = saltedCommitment(salt, value);
  await store.insertDisclosure(executor, {
    commitment,
    ...owner,
    salt,
    value: canonicalJson(value),
  });
  return commitment;
}

/** Forgets what opens the commitments of one participant. The entries and their hashes stay. */
export async function forgetDisclosures(executor: Executor, participantId: string): Promise<void> {
  await store.deleteDisclosures(executor, participantId);
}

/**
 * Logs and counts a look: a joining of measured values with conditions.
 *
 * @returns the number of this look in its study, from 1
 */
export async function recordLook(
  executor: Executor,
  look: {
    readonly studyId: string;
    readonly kind: 'export' | 'analysis' | 'unblinding';
    readonly duringEnrolment: boolean;
    readonly actor: Actor;
    readonly subject: string;
    readonly details: { readonly [key: string]: JsonValue };
    readonly at: Date;
  },
): Promise<number> {
  const { number } = await appendEntry(executor, {
    chain: look.studyId,
    actor: look.actor,
    action: 'looked',
    subject: look.subject,
    details: { ...look.details, duringEnrolment: look.duringEnrolment, kind: look.kind },
    at: look.at,
  });
  return await store.insertLook(executor, { ...look, auditNumber: number });
}

/** Looks of a study so far, by kind and by whether enrolment was still open. */
export const countLooks = store.countLooks;
