import { AnalysisStopped, runPlan } from '#core/analysis/run-plan.ts';
import {
  assembleSnapshot,
  type SnapshotBody,
  type StoredContent,
} from '#core/analysis/snapshot.ts';
import { canonicalJson, jsonValueOf } from '#core/hashing/canonical-json.ts';
import { sha256Hex } from '#core/hashing/digest.ts';
import type { Protocol } from '#core/protocol/protocol.ts';
import { reportPage } from '#core/reporting/page.ts';
import { canonicalReportBody, reportBody } from '#core/reporting/report-body.ts';
import { engineVersion } from './engine.ts';
import { type Fault, faultOf } from './fault.ts';

/**
 * What a report is a function of, together with the engine's version. The long parts are the texts
 * as stored: they are checked and parsed beside the event loop, not in it.
 */
export interface ComputationInput {
  readonly protocol: Protocol;
  readonly protocolVersion: number;
  readonly protocolSha256: string;
  readonly snapshotBody: string;
  readonly snapshotSha256: string;
  readonly contents: readonly { readonly salt: Uint8Array; readonly content: string }[];
  readonly seed: string;
}

/** A report as it will be stored. */
export interface ComputedReport {
  /** Canonical JSON (RFC 8785). */
  readonly body: string;
  readonly sha256: string;
  readonly page: string;
  readonly pageSha256: string;
  readonly engineVersion: string;
}

export type ComputationOutcome =
  | { readonly kind: 'computed'; readonly report: ComputedReport }
  | { readonly kind: 'stopped' }
  | { readonly kind: 'erased'; readonly participants: number }
  | { readonly kind: 'altered'; readonly what: 'protocol' | 'snapshot' }
  | { readonly kind: 'fault'; readonly fault: Fault };

export interface ComputationHooks {
  /** @param fraction from 0 to 1 */
  readonly onProgress: (fraction: number, stage: string) => void;
  readonly shouldStop: () => boolean;
}

/**
 * Checks that protocol and snapshot are what their hashes say, runs the plan and writes the report.
 * A pure function of the input and of the engine; never throws.
 */
export function compute(input: ComputationInput, hooks: ComputationHooks): ComputationOutcome {
  try {
    if (sha256Hex(canonicalJson(jsonValueOf(input.protocol))) !== input.protocolSha256) {
      return { kind: 'altered', what: 'protocol' };
    }
    if (sha256Hex(input.snapshotBody) !== input.snapshotSha256) {
      return { kind: 'altered', what: 'snapshot' };
    }
    const snapshotBody: SnapshotBody = JSON.parse(input.snapshotBody);
    const assembled = assembleSnapshot(
      snapshotBody,
      input.contents.map(
        ({ salt, content }): StoredContent => ({ salt, content: JSON.parse(content) }),
      ),
    );
    if (!assembled.recomputable) {
      return assembled.reason === 'participant-erased'
        ? { kind: 'erased', participants: assembled.participantIds.length }
        : { kind: 'altered', what: 'snapshot' };
    }
    const { protocol, seed } = input;
    const result = runPlan(protocol, assembled.snapshot, { seed, ...hooks });
    const version = engineVersion();
    const report = reportBody({ ...input, snapshotBody, engineVersion: version, result });
    const body = canonicalReportBody(report);
    const sha256 = sha256Hex(body);
    const page = reportPage(report, sha256);
    return {
      kind: 'computed',
      report: {
        body,
        sha256,
        page,
        pageSha256: sha256Hex(page),
        engineVersion: version,
      },
    };
  } catch (error) {
    if (error instanceof AnalysisStopped) return { kind: 'stopped' };
    return { kind: 'fault', fault: faultOf(error) };
  }
}
