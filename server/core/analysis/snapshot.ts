import { DomainError } from '../errors.ts';
import { canonicalJson, type JsonValue, jsonValueOf } from '../hashing/canonical-json.ts';
import { saltedCommitment, sha256Hex } from '../hashing/digest.ts';

/**
 * What an analysis ran on, frozen and hashed. It exists in two halves, so that one participant can
 * be erased later without breaking the hash: the body, which is hashed and kept, and one
 * {@link SnapshotParticipantContent} a participant, which is erasable and to which the body holds
 * a salted commitment. Both halves are plain JSON; all times are ISO 8601 in UTC.
 */
export interface SnapshotBody {
  readonly studyId: string;
  /** Whether more participants may still arrive: an analysis before the end is a look. */
  readonly enrolment: 'enrolling' | 'paused' | 'closed';
  /** Every registered version under which a participant was allocated, ascending. */
  readonly protocolVersions: readonly { readonly number: number; readonly sha256: string }[];
  /** By siteId. */
  readonly sites: readonly SnapshotSite[];
  /** Looks up to and including this one, by kind and by whether enrolment was still open. */
  readonly looks: readonly LookCount[];
  /** In the order of {@link compareParticipants}. */
  readonly participants: readonly SnapshotParticipantFrame[];
}

export interface SnapshotSite {
  readonly siteId: string;
  readonly label: string;
  readonly targetEnrolment: number;
}

export interface LookCount {
  readonly kind: string;
  readonly duringEnrolment: boolean;
  readonly count: number;
}

/** What is known of a participant's passage through the study without any measured value. */
export interface SnapshotParticipantFrame {
  /** UUID; the code never stands in a snapshot. */
  readonly id: string;
  readonly siteId: string;
  readonly stratum: string;
  readonly protocolVersion: number;
  /** From 1 in the site's list. A replacement has the slot number of the one it replaces. */
  readonly slotNumber: number;
  /** Condition keys by period, as assigned. */
  readonly sequence: readonly string[];
  readonly arrivedAt: string;
  /** Null for a participant who neither withdrew nor was voided. */
  readonly ending: ParticipantEnding | null;
  /** By period, ascending; a period never started may be absent. */
  readonly periods: readonly SnapshotPeriod[];
  /** Salted, to the personal half; null when it was already erased at freezing. */
  readonly contentCommitment: string | null;
}

export type ParticipantEnding =
  | {
      readonly kind: 'withdrawn';
      readonly at: string;
      readonly reasonCode: string;
      readonly periodReached: number;
    }
  | { readonly kind: 'void'; readonly at: string };

export interface SnapshotPeriod {
  /** From 1. */
  readonly period: number;
  readonly startedAt: string | null;
  readonly completedAt: string | null;
  /** Coded kinds of what differed from the protocol at the start: `too-early`, `out-of-turn`. */
  readonly deviations: readonly string[];
}

/** The personal half of one participant: every current trial record. */
export interface SnapshotParticipantContent {
  readonly participantId: string;
  /** In the order of period, then repetition. */
  readonly trials: readonly SnapshotTrial[];
}

export interface SnapshotTrial {
  readonly period: number;
  readonly repetition: number;
  /** Condition key as presented, which is what the analysis goes by. */
  readonly condition: string;
  /** True when the condition presented differs from the one assigned. */
  readonly deviation: boolean;
  /** `out-of-range:<measure>` and the like, set when the record came in. */
  readonly flags: readonly string[];
  /** By measure key; null where missing. */
  readonly values: { readonly [measure: string]: number | boolean | null };
  /** Reason code by measure key, for values that are missing. */
  readonly missing: { readonly [measure: string]: string };
  readonly startedAt: string | null;
  readonly endedAt: string | null;
}

/** Both halves together: what the analysis reads. */
export interface Snapshot extends Omit<SnapshotBody, 'participants'> {
  readonly participants: readonly SnapshotParticipant[];
}

export interface SnapshotParticipant extends SnapshotParticipantFrame {
  /** Null when erased before freezing: the participant counts in the flow and has no data. */
  readonly content: SnapshotParticipantContent | null;
}

/** What is stored, and erased, per participant. */
export interface StoredContent {
  /** At least 16 random bytes, its own for each snapshot and participant. */
  readonly salt: Uint8Array;
  readonly content: SnapshotParticipantContent;
}

/** What assembling gave: the snapshot, or why it cannot be had any more. */
export type AssembledSnapshot =
  | { readonly recomputable: true; readonly snapshot: Snapshot }
  | {
      readonly recomputable: false;
      /** Erased since freezing, or no longer what the body committed to. */
      readonly reason: 'participant-erased' | 'content-altered';
      readonly participantIds: readonly string[];
    };

/**
 * The canonical order of participants: by site id, slot number, time of arrival, id. Sums run in
 * this order, so that equal snapshots give equal bytes.
 */
export function compareParticipants(
  a: SnapshotParticipantFrame,
  b: SnapshotParticipantFrame,
): number {
  return (
    compareText(a.siteId, b.siteId) ||
    a.slotNumber - b.slotNumber ||
    compareText(a.arrivedAt, b.arrivedAt) ||
    compareText(a.id, b.id)
  );
}

/**
 * Splits a snapshot into its hashed body and its erasable contents, everything in canonical order.
 *
 * @param snapshot participants, trials, sites in any order
 * @param saltOf   the salt of a participant, by id: random, at least 16 bytes
 * @throws {DomainError} when a participant occurs twice, a content belongs to somebody else, or a
 *   salt is too short
 */
export function splitSnapshot(
  snapshot: Omit<Snapshot, 'participants'> & {
    readonly participants: readonly Omit<SnapshotParticipant, 'contentCommitment'>[];
  },
  saltOf: (participantId: string) => Uint8Array,
): { body: SnapshotBody; contents: StoredContent[] } {
  const contents: StoredContent[] = [];
  const seen = new Set<string>();
  const frames = snapshot.participants.map(({ content, ...frame }) => {
    if (seen.has(frame.id)) throw new DomainError(`Participant ${frame.id} occurs twice`);
    seen.add(frame.id);
    if (content === null) return { ...frame, contentCommitment: null };
    if (content.participantId !== frame.id) {
      throw new DomainError(`Participant ${frame.id} has the content of another`);
    }
    const ordered = { ...content, trials: content.trials.toSorted(compareTrials) };
    const salt = saltOf(frame.id);
    contents.push({ salt, content: ordered });
    return { ...frame, contentCommitment: contentCommitment(salt, ordered) };
  });
  const body: SnapshotBody = {
    studyId: snapshot.studyId,
    enrolment: snapshot.enrolment,
    protocolVersions: snapshot.protocolVersions.toSorted((a, b) => a.number - b.number),
    sites: snapshot.sites.toSorted((a, b) => compareText(a.siteId, b.siteId)),
    looks: snapshot.looks.toSorted(
      (a, b) =>
        compareText(a.kind, b.kind) || Number(a.duringEnrolment) - Number(b.duringEnrolment),
    ),
    participants: frames.toSorted(compareParticipants),
  };
  return { body, contents };
}

/**
 * Rejoins the halves of a snapshot and checks each content against the commitment in the body.
 *
 * @param contents in any order; a participant whose content the body committed to and which is not
 *   here has been erased, and recomputing is then impossible
 */
export function assembleSnapshot(
  body: SnapshotBody,
  contents: Iterable<StoredContent>,
): AssembledSnapshot {
  const byParticipant = new Map<string, StoredContent>();
  for (const stored of contents) byParticipant.set(stored.content.participantId, stored);
  const erased: string[] = [];
  const altered: string[] = [];
  const participants = body.participants.map((frame): SnapshotParticipant => {
    const stored = byParticipant.get(frame.id);
    if (frame.contentCommitment === null) return { ...frame, content: null };
    if (stored === undefined) erased.push(frame.id);
    else if (contentCommitment(stored.salt, stored.content) !== frame.contentCommitment) {
      altered.push(frame.id);
    }
    return { ...frame, content: stored?.content ?? null };
  });
  if (altered.length > 0) {
    return { recomputable: false, reason: 'content-altered', participantIds: altered };
  }
  if (erased.length > 0) {
    return { recomputable: false, reason: 'participant-erased', participantIds: erased };
  }
  return { recomputable: true, snapshot: { ...body, participants } };
}

/** SHA-256 of the body's canonical JSON (RFC 8785), as hexadecimal. */
export function snapshotSha256(body: SnapshotBody): string {
  return sha256Hex(canonicalSnapshotBody(body));
}

/** The exact text that is hashed and stored. */
export function canonicalSnapshotBody(body: SnapshotBody): string {
  return canonicalJson(jsonValueOf(body));
}

/** The commitment that a body holds to a participant's content. */
export function contentCommitment(salt: Uint8Array, content: SnapshotParticipantContent): string {
  const value: JsonValue = jsonValueOf(content);
  return saltedCommitment(salt, value);
}

function compareTrials(a: SnapshotTrial, b: SnapshotTrial): number {
  return (
    a.period - b.period || a.repetition - b.repetition || compareText(a.condition, b.condition)
  );
}

/** By UTF-16 code units, so that no locale has a say. */
function compareText(a: string, b: string): number {
  return a < b ? -1 : a > b ? 1 : 0;
}
