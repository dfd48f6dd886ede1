import type { Condition, Measure, Protocol } from '#core/protocol/protocol.ts';

/** What a registered protocol version asks of a trial record, ready for many rows. */
export interface TrialRules {
  readonly periods: number;
  readonly repetitions: number;
  readonly conditionKeys: ReadonlySet<string>;
  readonly measures: ReadonlyMap<string, Measure>;
  /** Measures that a record of repetition 1 has, and those that every other has. */
  readonly expectedFirst: readonly Measure[];
  readonly expectedLater: readonly Measure[];
  /** Measure keys by UTF-16 code units, as canonical JSON orders them. */
  readonly keysInOrder: readonly string[];
}

export function trialRules(registered: {
  readonly protocol: Protocol;
  readonly conditions: readonly Condition[];
}): TrialRules {
  const { measures, periods } = registered.protocol;
  return {
    periods: periods.count,
    repetitions: periods.repetitions,
    conditionKeys: new Set(registered.conditions.map(({ key }) => key)),
    measures: new Map(measures.map((measure) => [measure.key, measure])),
    expectedFirst: measures,
    expectedLater: measures.filter(({ taken }) => taken === 'each-trial'),
    keysInOrder: measures.map(({ key }) => key).sort(),
  };
}
