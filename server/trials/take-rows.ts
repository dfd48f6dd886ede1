import { createHash } from 'node:crypto';
import { type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { ascendingUuids } from '#platform/ids.ts';
import { codeKeyOf, findParticipants, type KnownParticipant } from '#server/allocations/service.ts';
import { registeredProtocol } from '#server/studies/service.ts';
import { checkTrial } from './check-trial.ts';
import { PresentTrials } from './present-trials.ts';
import * as store from './store-trials.ts';
import * as uploadStore from './store-uploads.ts';
import { contentText, differences, parseContent, saltContent } from './trial-content.ts';
import { type TrialRules, trialRules } from './trial-rules.ts';
import type { RowFault, TrialFields, UploadRow } from './upload-row.ts';

/** Where the rows of an upload come from and go to. */
export interface UploadTarget {
  readonly id: string;
  readonly studyId: string;
  readonly siteId: string;
  readonly receivedAt: Date;
}

interface Owner {
  readonly participant: KnownParticipant;
  readonly rules: TrialRules;
}

/** A row without fault of its own, ready to be compared with what is stored. */
interface Candidate {
  readonly row: UploadRow;
  readonly fields: TrialFields;
  readonly owner: Owner;
  readonly place: store.TrialPlace;
  readonly deviation: boolean;
  readonly flags: readonly string[];
  readonly content: string;
}

const PARTICIPANT_UNKNOWN: RowFault = {
  pointer: '/participant',
  code: 'participant-unknown',
  message: 'No participant with this code is known here.',
};

const RECORD_ID_TAKEN: RowFault = {
  pointer: '/recordId',
  code: 'record-id-taken',
  message: 'Another record of the study has this id.',
};

/**
 * Takes the rows of one upload, a batch at a time, in one transaction that holds the lock of the
 * study's trials: checks them, compares them with what is stored, stores what is new, keeps what is
 * refused. What grows with the upload is only a number for each record and the codes that were met.
 */
export class UploadRun {
  readonly counts = { rows: 0, accepted: 0, repeated: 0, refused: 0, flagged: 0, deviations: 0 };
  readonly #tx: SqlTransaction;
  readonly #target: UploadTarget;
  readonly #owners = new Map<string, Owner>();
  readonly #rules = new Map<number, TrialRules>();
  readonly #present = new PresentTrials();
  /** Periods to which this upload added, as participant and period. */
  readonly #touched = new Map<string, Set<number>>();
  readonly #commitments = createHash('sha256');
  readonly #nextId = ascendingUuids();
  /** The batch before is written while the next one is read from the body. */
  #writing: Promise<void> = Promise.resolve();

  constructor(tx: SqlTransaction, target: UploadTarget) {
    this.#tx = tx;
    this.#target = target;
  }

  async take(rows: readonly UploadRow[]): Promise<void> {
    await this.#writing;
    await this.#readOwners(rows);
    const refused: uploadStore.NewRefusedRow[] = [];
    const candidates: Candidate[] = [];
    for (const row of rows) {
      const checked = this.#check(row);
      if ('faults' in checked) refused.push(this.#refusal(row, checked.faults));
      else candidates.push(checked);
    }
    const added = await this.#compare(candidates, refused);
    this.counts.rows += rows.length;
    this.counts.refused += refused.length;
    this.#writing = this.#write(added, refused);
    // Whoever takes the next batch, or finishes, meets a failure; until then it is not unhandled.
    this.#writing.catch(() => undefined);
  }

  /** Waits for what is being written. */
  async finish(): Promise<void> {
    await this.#writing;
  }

  /** Takes every stored row back; what was refused stays kept. */
  async takeBack(): Promise<void> {
    await store.deleteTrialsOfUpload(this.#tx, this.#target.id, [...this.#touched.keys()]);
    this.#touched.clear();
    Object.assign(this.counts, { accepted: 0, flagged: 0, deviations: 0 });
  }

  /** Periods that got a record by this upload, and of those the ones that are complete now. */
  periods() {
    const begun = [...this.#touched].flatMap(([participantId, periods]) =>
      [...periods].map((period) => ({ participantId, period })),
    );
    const rulesOf = new Map(
      [...this.#owners.values()].map(({ participant, rules }) => [participant.id, rules]),
    );
    const completed = begun.filter(({ participantId, period }) => {
      const rules = rulesOf.get(participantId);
      return rules !== undefined && this.#present.isComplete(participantId, period, rules);
    });
    return { begun, completed };
  }

  /**
   * SHA-256 over the commitments of the rows stored, each followed by a line feed, in the order of
   * the rows, which is that of the trials' ids; hexadecimal.
   */
  commitmentsSha256(): string {
    return this.#commitments.copy().digest('hex');
  }

  /** Reads participants not met before, with their rules and which of their trials are stored. */
  async #readOwners(rows: readonly UploadRow[]): Promise<void> {
    const { studyId, siteId } = this.#target;
    const codes = new Set<string>();
    for (const { participant } of rows) {
      if (participant === null) continue;
      const key = codeKeyOf(participant);
      if (!this.#owners.has(key)) codes.add(key);
    }
    if (codes.size === 0) return;
    const found = await findParticipants(this.#tx, studyId, [...codes]);
    const added = new Map<string, TrialRules>();
    for (const [key, participant] of found) {
      if (participant.siteId !== siteId) continue;
      const rules = await this.#rulesOf(participant.protocolVersion);
      this.#owners.set(key, { participant, rules });
      this.#present.addParticipant(participant.id);
      added.set(participant.id, rules);
    }
    if (added.size === 0) return;
    for (const place of await store.selectStoredPlaces(this.#tx, [...added.keys()])) {
      const rules = added.get(place.participantId);
      if (rules !== undefined) this.#present.add(place, rules);
    }
  }

  async #rulesOf(version: number): Promise<TrialRules> {
    const known = this.#rules.get(version);
    if (known !== undefined) return known;
    const { studyId } = this.#target;
    const rules = trialRules(await registeredProtocol(sqlExecutor(this.#tx), studyId, version));
    this.#rules.set(version, rules);
    return rules;
  }

  #check(row: UploadRow): Candidate | { faults: readonly RowFault[] } {
    const { fields } = row;
    if (fields === null) return { faults: row.faults };
    const owner = this.#owners.get(codeKeyOf(fields.participant));
    if (owner === undefined) return { faults: [PARTICIPANT_UNKNOWN] };
    const checked = checkTrial(fields, owner.participant, owner.rules);
    if (checked.faults.length > 0) return { faults: checked.faults };
    const { period, repetition } = fields;
    return {
      row,
      fields,
      owner,
      place: { participantId: owner.participant.id, period, repetition },
      deviation: checked.deviation,
      flags: checked.flags,
      content: contentText(fields, checked, owner.rules),
    };
  }

  /** Tells new records from repeated and conflicting ones, in the order of the rows. */
  async #compare(
    candidates: readonly Candidate[],
    refused: uploadStore.NewRefusedRow[],
  ): Promise<store.NewTrial[]> {
    const stored = await this.#storedContents(candidates);
    const recordIds = await this.#recordIdPlaces(candidates);
    const added: store.NewTrial[] = [];
    for (const candidate of candidates) {
      const { row, fields, place, owner, content } = candidate;
      const key = placeKey(place);
      const versions = stored.get(key);
      const holder = recordIds.get(fields.recordId);
      if (versions !== undefined) {
        if (versions.includes(content)) this.counts.repeated += 1;
        else refused.push(this.#refusal(row, conflicts(versions, content)));
      } else if (holder !== undefined && holder !== key) {
        refused.push(this.#refusal(row, [RECORD_ID_TAKEN]));
      } else {
        stored.set(key, [content]);
        recordIds.set(fields.recordId, key);
        this.#present.add(place, owner.rules);
        added.push(this.#newTrial(candidate));
      }
    }
    return added;
  }

  /** Contents by place for candidates whose place is taken; the current version comes first. */
  async #storedContents(candidates: readonly Candidate[]): Promise<Map<string, string[]>> {
    const taken = candidates.filter(({ place, owner }) => this.#present.has(place, owner.rules));
    const contents = new Map<string, string[]>();
    if (taken.length === 0) return contents;
    const places = taken.map(({ place }) => place);
    for (const row of await store.selectContentsAt(this.#tx, places)) {
      const versions = contents.get(placeKey(row));
      if (versions === undefined) contents.set(placeKey(row), [row.content]);
      else if (row.current) versions.unshift(row.content);
      else versions.push(row.content);
    }
    return contents;
  }

  async #recordIdPlaces(candidates: readonly Candidate[]): Promise<Map<string, string>> {
    const ids = candidates.map(({ fields }) => fields.recordId);
    const rows = await store.selectRecordIds(this.#tx, this.#target.studyId, ids);
    return new Map(rows.map((row) => [row.recordId, placeKey(row)]));
  }

  #newTrial({ place, fields, deviation, flags, content }: Candidate): store.NewTrial {
    const { salt, commitment } = saltContent(content);
    this.#commitments.update(`${commitment}\n`);
    this.counts.accepted += 1;
    if (flags.length > 0) this.counts.flagged += 1;
    if (deviation) this.counts.deviations += 1;
    const periods = this.#touched.get(place.participantId);
    if (periods === undefined) this.#touched.set(place.participantId, new Set([place.period]));
    else periods.add(place.period);
    return {
      ...place,
      id: this.#nextId(),
      version: 1,
      condition: fields.condition,
      deviation,
      flags,
      commitment,
      recordId: fields.recordId,
      salt,
      content,
    };
  }

  #refusal(row: UploadRow, faults: readonly RowFault[]): uploadStore.NewRefusedRow {
    const codeKey = row.participant === null ? null : codeKeyOf(row.participant);
    const owner = codeKey === null ? undefined : this.#owners.get(codeKey);
    return {
      row: row.number,
      participantId: owner?.participant.id ?? null,
      codeKey,
      raw: row.text,
      faults: JSON.stringify(faults),
    };
  }

  async #write(
    added: readonly store.NewTrial[],
    refused: readonly uploadStore.NewRefusedRow[],
  ): Promise<void> {
    const { id, studyId, receivedAt } = this.#target;
    await store.copyTrials(this.#tx, { studyId, uploadId: id, receivedAt }, added);
    await uploadStore.copyRefusedRows(this.#tx, id, refused);
  }
}

function placeKey({ participantId, period, repetition }: store.TrialPlace): string {
  return `${participantId}/${period}/${repetition}`;
}

/** In which fields a row differs from the current version. */
function conflicts(versions: readonly string[], content: string): RowFault[] {
  const [current] = versions;
  if (current === undefined) throw new Error('A stored record has a version.');
  return differences(parseContent(current), parseContent(content));
}
