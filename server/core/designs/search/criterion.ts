import { householderQr } from '../../numerics/householder-qr.ts';
import { type DesignInformation, differenceVariance } from '../information.ts';
import type { SearchCriterion, WeightedPair } from './search-types.ts';

/** Every pair of conditions with the same weight. */
export function allPairs(conditionCount: number, weight = 1): WeightedPair[] {
  const pairs: WeightedPair[] = [];
  for (let first = 0; first < conditionCount; first += 1) {
    for (let second = first + 1; second < conditionCount; second += 1) {
      pairs.push({ first, second, weight });
    }
  }
  return pairs;
}

/** A pair among the columns of an information matrix, with its share of the average. */
interface ColumnPair extends WeightedPair {
  /** t for carryover effects, whose columns follow the direct ones; 0 for direct effects. */
  readonly offset: number;
}

/** The pairs with a weight, scaled so that the weights add up to 1. */
function columnPairs(criterion: SearchCriterion, conditionCount: number): ColumnPair[] {
  const pairs = [
    ...criterion.direct.map((pair) => ({ ...pair, offset: 0 })),
    ...criterion.carryover.map((pair) => ({ ...pair, offset: conditionCount })),
  ].filter(({ weight }) => weight > 0);
  const total = pairs.reduce((sum, { weight }) => sum + weight, 0);
  return pairs.map((pair) => ({ ...pair, weight: pair.weight / total }));
}

/** How many effects the model has: t, or 2t with carryover. */
export function effectCount(criterion: SearchCriterion, conditionCount: number): number {
  return criterion.carryoverInModel ? 2 * conditionCount : conditionCount;
}

/**
 * The matrix W with Σ weight·variance = tr(W·C⁻): the sum of weight·w·wᵀ over the pairs, with
 * w = +1 and −1 at the pair's columns; weights add up to 1. Row-major, effects × effects.
 */
export function weightMatrix(criterion: SearchCriterion, conditionCount: number): Float64Array {
  const size = effectCount(criterion, conditionCount);
  const weights = new Float64Array(size * size);
  for (const { first, second, weight, offset } of columnPairs(criterion, conditionCount)) {
    const row = first + offset;
    const column = second + offset;
    weights[row * size + row]! += weight;
    weights[column * size + column]! += weight;
    weights[row * size + column]! -= weight;
    weights[column * size + row]! -= weight;
  }
  return weights;
}

/**
 * The weighted average variance in the ideal layout: 1/rᵢ + 1/rⱼ for a pair, r the direct
 * replication; Infinity when a weighted condition does not occur.
 */
export function idealVariance(criterion: SearchCriterion, replication: ArrayLike<number>): number {
  return columnPairs(criterion, replication.length).reduce(
    (sum, { first, second, weight }) =>
      sum + weight * (1 / replication[first]! + 1 / replication[second]!),
    0,
  );
}

/** The criterion by the plain way, without updates: pairs solved for one by one. */
export interface CriterionValue {
  /** Weighted average variance over σ²; null when some weighted pair is not estimable. */
  readonly averageVariance: number | null;
  /** Which pairs are not estimable. */
  readonly missing: readonly { first: number; second: number; carryover: boolean }[];
}

export function criterionValue(
  information: DesignInformation,
  criterion: SearchCriterion,
): CriterionValue {
  const { conditionCount, direct, withCarryover } = information;
  const qr = householderQr(criterion.carryoverInModel ? withCarryover : direct);
  const missing: { first: number; second: number; carryover: boolean }[] = [];
  let average = 0;
  for (const { first, second, weight, offset } of columnPairs(criterion, conditionCount)) {
    const variance = differenceVariance(qr, first + offset, second + offset);
    if (variance === null) missing.push({ first, second, carryover: offset > 0 });
    else average += weight * variance;
  }
  return { averageVariance: missing.length > 0 ? null : average, missing };
}
