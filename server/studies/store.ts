import { z } from 'zod';
import type { Executor, RecordsTransaction } from '#platform/database.ts';

/** Rows of the one study, if it is within reach; with `lock`, held until the transaction ends. */
export function selectVisibleStudy(
  executor: Executor,
  studyId: string,
  reach: { readonly siteId: string | null; readonly labId: string | null },
  how: 'read' | 'lock',
): Promise<unknown[]> {
  return executor.query(
    `select s.id, s.lab_id as "labId", s.name, s.state, s.current_version as "currentVersion",
       s.secret_hash as "secretHash", s.slots_issued as "slotsIssued",
       s.created_at as "createdAt", s.closed_at as "closedAt"
     from studies s
     where s.id = $1::uuid
       and ($2::uuid is null or s.lab_id = $2::uuid)
       and ($3::uuid is null or exists (
         select 1 from study_sites t where t.study_id = s.id and t.site_id = $3::uuid))
     ${how === 'lock' ? 'for no key update of s' : ''}`,
    [studyId, reach.labId, reach.siteId],
  );
}

const registeredRows = z.array(z.object({ document: z.string(), sha256: z.string() }));

export async function selectRegisteredVersion(executor: Executor, studyId: string, number: number) {
  const rows = await executor.query(
    `select document, sha256 from protocol_versions
     where study_id = $1::uuid and number = $2::int and state = 'registered'`,
    [studyId, number],
  );
  return registeredRows.parse(rows)[0] ?? null;
}

const siteRows = z.array(
  z.object({ siteId: z.string(), targetEnrolment: z.number(), slotsIssued: z.number() }),
);

/** Sites of a study by id, those that a later version left out included (target 0). */
export async function selectStudySites(executor: Executor, studyId: string) {
  const rows = await executor.query(
    `select site_id as "siteId", target_enrolment as "targetEnrolment",
       slots_issued as "slotsIssued"
     from study_sites where study_id = $1::uuid order by site_id`,
    [studyId],
  );
  return siteRows.parse(rows);
}

const numberRows = z.tuple([z.object({ issueNumber: z.number(), number: z.number() })]);

/** Counts one more slot in the study and at the site. The study is locked by the caller. */
export async function updateSlotNumbers(executor: Executor, studyId: string, siteId: string) {
  const rows = await executor.query(
    `with study as (
       update studies set slots_issued = slots_issued + 1 where id = $1::uuid
       returning slots_issued),
     site as (
       update study_sites set slots_issued = slots_issued + 1
       where study_id = $1::uuid and site_id = $2::uuid returning slots_issued)
     select study.slots_issued as "issueNumber", site.slots_issued as number from study, site`,
    [studyId, siteId],
  );
  return numberRows.parse(rows)[0];
}

const secretRows = z.array(z.object({ secret: z.instanceof(Uint8Array).nullable() }));

export async function selectSecret(executor: Executor, studyId: string) {
  const rows = await executor.query('select secret from studies where id = $1::uuid', [studyId]);
  return secretRows.parse(rows)[0]?.secret ?? null;
}

export function insertStudy(
  tx: RecordsTransaction,
  study: { id: string; labId: string; name: string; createdAt: Date },
) {
  return tx.study.create({ data: { ...study, state: 'draft' } });
}

export function selectStudies(
  tx: RecordsTransaction,
  filter: { siteId: string | null; labId: string | null; after: string | null; limit: number },
) {
  return tx.study.findMany({
    where: {
      ...(filter.labId === null ? {} : { labId: filter.labId }),
      ...(filter.siteId === null ? {} : { sites: { some: { siteId: filter.siteId } } }),
      ...(filter.after === null ? {} : { id: { gt: filter.after } }),
    },
    omit: { secret: true },
    orderBy: { id: 'asc' },
    take: filter.limit + 1,
  });
}

export function updateStudyState(
  tx: RecordsTransaction,
  id: string,
  change: { state: string; closedAt?: Date },
) {
  return tx.study.update({ where: { id }, data: change, omit: { secret: true } });
}

export function updateStudyRegistered(
  tx: RecordsTransaction,
  id: string,
  change: {
    currentVersion: number;
    state?: string;
    secret?: Uint8Array<ArrayBuffer>;
    secretHash?: string;
  },
) {
  return tx.study.update({ where: { id }, data: change, omit: { secret: true } });
}

export function selectDraft(tx: RecordsTransaction, studyId: string) {
  return tx.protocolVersion.findFirst({ where: { studyId, state: 'draft' } });
}

export function insertDraft(
  tx: RecordsTransaction,
  draft: { studyId: string; number: number; document: string; createdAt: Date },
) {
  return tx.protocolVersion.create({ data: { ...draft, state: 'draft', revision: 1 } });
}

export function updateDraft(
  tx: RecordsTransaction,
  draft: { studyId: string; number: number; document: string; revision: number },
) {
  const { studyId, number, document, revision } = draft;
  return tx.protocolVersion.update({
    where: { studyId_number: { studyId, number } },
    data: { document, revision },
  });
}

export function updateDraftRegistered(
  tx: RecordsTransaction,
  version: {
    studyId: string;
    number: number;
    document: string;
    sha256: string;
    reason: string | null;
    registeredAt: Date;
  },
) {
  const { studyId, number, ...registered } = version;
  return tx.protocolVersion.update({
    where: { studyId_number: { studyId, number } },
    data: { ...registered, state: 'registered' },
  });
}

export function selectVersions(
  tx: RecordsTransaction,
  filter: { studyId: string; after: number; limit: number },
) {
  return tx.protocolVersion.findMany({
    where: { studyId: filter.studyId, state: 'registered', number: { gt: filter.after } },
    omit: { document: true },
    orderBy: { number: 'asc' },
    take: filter.limit + 1,
  });
}

export function selectVersion(tx: RecordsTransaction, studyId: string, number: number) {
  return tx.protocolVersion.findFirst({ where: { studyId, number, state: 'registered' } });
}

/** Sets the targets of the version in force; sites that it leaves out keep their row with 0. */
export async function replaceSiteTargets(
  tx: RecordsTransaction,
  studyId: string,
  targets: readonly { siteId: string; targetEnrolment: number }[],
): Promise<void> {
  await tx.studySite.updateMany({ where: { studyId }, data: { targetEnrolment: 0 } });
  for (const { siteId, targetEnrolment } of targets) {
    await tx.studySite.upsert({
      where: { studyId_siteId: { studyId, siteId } },
      create: { studyId, siteId, targetEnrolment },
      update: { targetEnrolment },
    });
  }
}
