import { type Condition, conditionsOf, type Protocol } from '../protocol/protocol.ts';
import { SINGLE_STRATUM, strataOf } from '../protocol/strata.ts';
import {
  compareParticipants,
  type Snapshot,
  type SnapshotParticipant,
  type SnapshotTrial,
} from './snapshot.ts';

/**
 * A snapshot made ready for one protocol version: values as numbers, trials and participants in
 * canonical order, what the version does not know set aside and counted.
 */
export interface AnalysisData {
  readonly protocol: Protocol;
  readonly conditions: readonly Condition[];
  readonly participants: readonly AnalysisParticipant[];
  readonly outsideProtocol: OutsideProtocol;
}

/** Data of other protocol versions that this version has no place for. */
export interface OutsideProtocol {
  /** Participants with trials whose stratum this version does not have. */
  readonly participants: number;
  /** Trials of those participants, and trials of a condition or period this version lacks. */
  readonly trials: number;
}

export interface AnalysisParticipant {
  readonly frame: SnapshotParticipant;
  /** Level key by between factor. */
  readonly betweenLevelKeys: readonly string[];
  readonly trials: readonly AnalysisTrial[];
}

export interface AnalysisTrial {
  readonly period: number;
  readonly repetition: number;
  /** As presented. */
  readonly condition: string;
  /** By measure key; yes is 1 and no is 0; null where missing or excluded. */
  readonly values: { readonly [measure: string]: number | null };
  readonly missing: { readonly [measure: string]: string };
  /** Measures whose value an exclusion rule left out. */
  readonly excluded: readonly string[];
}

/**
 * Reads a snapshot by one protocol version. A trial counts under the condition that was presented,
 * not the one that was assigned. A voided check-in has no data.
 */
export function analysisData(protocol: Protocol, snapshot: Snapshot): AnalysisData {
  const conditions = conditionsOf(protocol.withinFactors);
  const conditionKeys = new Set(conditions.map(({ key }) => key));
  const strata = new Set(strataOf(protocol.betweenFactors));
  let strayParticipants = 0;
  let strayTrials = 0;
  const participants = snapshot.participants.toSorted(compareParticipants).map((frame) => {
    const recorded = frame.ending?.kind === 'void' ? [] : (frame.content?.trials ?? []);
    const known = strata.has(frame.stratum)
      ? recorded.filter(
          (trial) => conditionKeys.has(trial.condition) && trial.period <= protocol.periods.count,
        )
      : [];
    strayTrials += recorded.length - known.length;
    if (recorded.length > 0 && !strata.has(frame.stratum)) strayParticipants += 1;
    const betweenLevelKeys = frame.stratum === SINGLE_STRATUM ? [] : frame.stratum.split('.');
    return { frame, betweenLevelKeys, trials: known.toSorted(compareTrials).map(analysisTrial) };
  });
  return {
    protocol,
    conditions,
    participants,
    outsideProtocol: { participants: strayParticipants, trials: strayTrials },
  };
}

function analysisTrial(trial: SnapshotTrial): AnalysisTrial {
  const values: { [measure: string]: number | null } = {};
  for (const [measure, value] of Object.entries(trial.values)) {
    values[measure] = typeof value === 'boolean' ? Number(value) : value;
  }
  const { period, repetition, condition, missing } = trial;
  return { period, repetition, condition, values, missing, excluded: [] };
}

function compareTrials(a: SnapshotTrial, b: SnapshotTrial): number {
  return a.period - b.period || a.repetition - b.repetition;
}
