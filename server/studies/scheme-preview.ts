import { designProperties, wholeBlocks } from '#core/designs/design-properties.ts';
import { designEfficiency, type EffectEfficiency } from '#core/designs/efficiency.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { conditionKeysOf, withinFactorFaults } from '#core/protocol/check-factors.ts';
import { schemeFaults } from '#core/protocol/check-scheme.ts';
import { conditionsOf } from '#core/protocol/protocol.ts';
import { ProblemError } from '#platform/problems.ts';
import type { SchemePreviewBody, SchemePreviewResponse } from './schemas.ts';

/**
 * What a scheme would hand out, before anything is registered: its sequences, their counts, and
 * how many participants make whole blocks.
 *
 * @throws {ProblemError} `protocol-not-registrable` with every fault of factors and scheme
 */
export function schemePreview(body: SchemePreviewBody): SchemePreviewResponse {
  const { withinFactors, scheme, periods, targetEnrolments } = body;
  const keys = conditionKeysOf(withinFactors);
  const faults = withinFactorFaults(withinFactors);
  if (keys !== null) faults.push(...schemeFaults(scheme, keys, periods));
  if (faults.length > 0 || keys === null) {
    throw new ProblemError('protocol-not-registrable', 'This scheme cannot be built.', { faults });
  }
  const conditions = conditionsOf(withinFactors).map(({ key, label }) => ({ key, label }));
  const sequences = sequencesOf(scheme, keys, periods);
  const properties = designProperties(sequences, keys.length);
  const efficiency = designEfficiency(sequences, keys.length);
  const keyOf = (index: number): string => keys[index] ?? '';
  const effect = ({ efficiency: share, contrasts }: EffectEfficiency) => ({
    efficiency: share.estimable ? share.value : null,
    notEstimable: contrasts
      .filter(({ variance }) => !variance.estimable)
      .map(({ first, second }) => ({ first: keyOf(first), second: keyOf(second) })),
  });
  return {
    conditions,
    sequences: sequences.map((sequence, index) => ({
      number: index + 1,
      conditions: sequence.map(keyOf),
      labels: sequence.map((condition) => conditions[condition]?.label ?? ''),
    })),
    participantsPerBlock: properties.participantsPerBlock,
    conditionByPeriod: properties.conditionByPeriod.map((counts, index) => ({
      condition: keyOf(index),
      counts,
    })),
    orderedPairs: properties.orderedPairs.flatMap((row, first) =>
      row.map((count, second) => ({ first: keyOf(first), second: keyOf(second), count })),
    ),
    uniformOnPeriods: properties.uniformOnPeriods,
    carryoverBalanced: properties.carryoverBalanced,
    stronglyCarryoverBalanced: properties.stronglyCarryoverBalanced,
    uniformWithinSequences: properties.uniformWithinSequences,
    lags: properties.lags.map(({ lag, balanced, stronglyBalanced }) => ({
      lag,
      balanced,
      stronglyBalanced,
    })),
    efficiency: {
      direct: effect(efficiency.direct),
      directAdjusted: effect(efficiency.directAdjusted),
      carryover: effect(efficiency.carryover),
    },
    targets: targetEnrolments.map((targetEnrolment) => ({
      targetEnrolment,
      ...wholeBlocks(properties.participantsPerBlock, targetEnrolment),
    })),
  };
}
