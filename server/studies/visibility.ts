import { z } from 'zod';
import type { Principal } from '#platform/call.ts';
import type { Executor } from '#platform/database.ts';
import { ProblemError } from '#platform/problems.ts';
import * as store from './store.ts';

export const STUDY_STATES = ['draft', 'enrolling', 'paused', 'closed'] as const;
export type StudyState = (typeof STUDY_STATES)[number];

/** A study as other features see it: never its allocation secret. */
export interface Study {
  readonly id: string;
  readonly labId: string;
  readonly name: string;
  readonly state: StudyState;
  /** Number of the registered version in force; null before the first registration. */
  readonly currentVersion: number | null;
  /** SHA-256 of the allocation secret, hexadecimal; null before the first registration. */
  readonly secretHash: string | null;
  readonly slotsIssued: number;
  readonly createdAt: Date;
  readonly closedAt: Date | null;
}

const studyRow = z.object({
  id: z.string(),
  labId: z.string(),
  name: z.string(),
  state: z.enum(STUDY_STATES),
  currentVersion: z.number().nullable(),
  secretHash: z.string().nullable(),
  slotsIssued: z.number(),
  createdAt: z.date(),
  closedAt: z.date().nullable(),
});

/** Which studies a principal sees: those of a site, of a lab, or all when both are null. */
export interface StudyReach {
  readonly siteId: string | null;
  readonly labId: string | null;
}

/**
 * Site coordinators and stations see studies that their site takes or took part in, the other roles
 * of a lab the studies it owns, administrators and auditors of the whole service all.
 */
export function studyReach(principal: Principal): StudyReach {
  const { siteId, labId } = principal;
  return siteId === null ? { siteId: null, labId } : { siteId, labId: null };
}

/** The study, or null when there is none or none that the principal may see. */
export async function findVisibleStudy(
  executor: Executor,
  principal: Principal,
  studyId: string,
): Promise<Study | null> {
  const rows = await store.selectVisibleStudy(executor, studyId, studyReach(principal), 'read');
  return rows.length === 0 ? null : studyRow.parse(rows[0]);
}

/** @throws {ProblemError} `not-found` when there is no such study, or none the caller may see */
export async function requireVisibleStudy(
  executor: Executor,
  principal: Principal,
  studyId: string,
): Promise<Study> {
  return found(await findVisibleStudy(executor, principal, studyId), studyId);
}

/**
 * The study, locked until the transaction ends: whoever allocates, registers or changes the state
 * goes one after the other. Rows that refer to the study can still be written meanwhile.
 *
 * @throws {ProblemError} `not-found` when there is no such study, or none the caller may see
 */
export async function lockVisibleStudy(
  executor: Executor,
  principal: Principal,
  studyId: string,
): Promise<Study> {
  const rows = await store.selectVisibleStudy(executor, studyId, studyReach(principal), 'lock');
  return found(rows.length === 0 ? null : studyRow.parse(rows[0]), studyId);
}

/**
 * The study without regard to who asks, for workers. Locked until the transaction ends when asked.
 *
 * @throws {ProblemError} `not-found`
 */
export async function requireStudy(executor: Executor, studyId: string): Promise<Study> {
  const everything = { siteId: null, labId: null };
  const rows = await store.selectVisibleStudy(executor, studyId, everything, 'read');
  return found(rows.length === 0 ? null : studyRow.parse(rows[0]), studyId);
}

/** @see requireStudy; the row stays locked until the transaction ends */
export async function lockStudy(executor: Executor, studyId: string): Promise<Study> {
  const everything = { siteId: null, labId: null };
  const rows = await store.selectVisibleStudy(executor, studyId, everything, 'lock');
  return found(rows.length === 0 ? null : studyRow.parse(rows[0]), studyId);
}

function found(study: Study | null, studyId: string): Study {
  if (study !== null) return study;
  throw new ProblemError('not-found', `There is no study ${studyId} here.`);
}
