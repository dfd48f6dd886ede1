import type { ExclusionRule } from '../protocol/protocol.ts';

/** What the registered exclusion rules left out, and why. Nobody is named but by UUID. */
export interface ExclusionAccount {
  /** In the order of the protocol, which is the order in which they were applied. */
  readonly rules: readonly RuleAccount[];
  /** Values left out, over all rules. */
  readonly values: number;
  /** Participants of whom every value was left out by a rule on participants. */
  readonly participants: number;
}

export interface RuleAccount {
  readonly rule: ExclusionRule;
  /** Values this rule left out; one that an earlier rule left out is not counted again. */
  readonly values: number;
  readonly byMeasure: readonly { readonly measure: string; readonly values: number }[];
  readonly bySite: readonly {
    readonly siteId: string;
    readonly values: number;
    readonly participants: number;
  }[];
  /** Each value left out by a rule on values: where it stood, never what it was. */
  readonly excludedValues: readonly ExcludedValue[];
  /** UUIDs of participants left out by a rule on participants. */
  readonly excludedParticipants: readonly string[];
}

export interface ExcludedValue {
  readonly participantId: string;
  readonly measure: string;
  readonly period: number;
  readonly repetition: number;
}
