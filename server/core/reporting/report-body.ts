import type { ResultTree } from '../analysis/result-types.ts';
import type { LookCount, SnapshotBody, SnapshotSite } from '../analysis/snapshot.ts';
import { canonicalJson, jsonValueOf } from '../hashing/canonical-json.ts';
import type { Protocol } from '../protocol/protocol.ts';
import { type MethodSource, sourcesOf } from './sources.ts';

/**
 * The part of a report that is hashed: a function of registered protocol, snapshot, engine version
 * and seed. Number, time and requester of the report stand outside it.
 */
export interface ReportBody {
  /** Of this shape; a change of the shape changes it. */
  readonly formatVersion: 1;
  readonly studyId: string;
  readonly protocol: {
    readonly version: number;
    /** SHA-256 of the canonical JSON of `document`. */
    readonly sha256: string;
    readonly document: Protocol;
  };
  readonly snapshot: {
    readonly sha256: string;
    readonly enrolment: SnapshotBody['enrolment'];
    readonly protocolVersions: SnapshotBody['protocolVersions'];
    readonly sites: readonly SnapshotSite[];
  };
  readonly engineVersion: string;
  readonly seed: string;
  /** Looks up to and including this analysis. */
  readonly looks: readonly LookCount[];
  readonly result: ResultTree;
  /** Published sources of the methods used. */
  readonly sources: readonly MethodSource[];
}

export interface ReportInput {
  readonly protocol: Protocol;
  readonly protocolVersion: number;
  readonly protocolSha256: string;
  readonly snapshotBody: SnapshotBody;
  readonly snapshotSha256: string;
  readonly engineVersion: string;
  readonly seed: string;
  readonly result: ResultTree;
}

/** The body of a report. Looks are those counted in the snapshot. */
export function reportBody(input: ReportInput): ReportBody {
  const { snapshotBody, result } = input;
  return {
    formatVersion: 1,
    studyId: snapshotBody.studyId,
    protocol: {
      version: input.protocolVersion,
      sha256: input.protocolSha256,
      document: input.protocol,
    },
    snapshot: {
      sha256: input.snapshotSha256,
      enrolment: snapshotBody.enrolment,
      protocolVersions: snapshotBody.protocolVersions,
      sites: snapshotBody.sites,
    },
    engineVersion: input.engineVersion,
    seed: input.seed,
    looks: snapshotBody.looks,
    result,
    sources: sourcesOf(result.measures),
  };
}

/**
 * The exact text of a body that is hashed and stored: canonical JSON (RFC 8785).
 *
 * @throws {DomainError} when the body holds NaN, an infinity or anything else JSON cannot carry
 */
export function canonicalReportBody(body: ReportBody): string {
  return canonicalJson(jsonValueOf(body));
}
