import { assert } from '../../errors.ts';
import { cholesky } from '../../numerics/cholesky.ts';
import { multiply } from '../../numerics/matrix.ts';
import { addSequenceInto, emptyInformationSums, informationOf } from '../information.ts';

/**
 * Added to the diagonal of the information, in units of 1/σ²: as if every effect had a prior of
 * variance 10⁶σ². A difference that the sequences do not determine then has a huge variance instead
 * of none, and the search finds its way out. It alters estimable variances by some parts in
 * 10⁶; the final figures are computed without it.
 * Source of the idea: DuMouchel & Jones 1994, Technometrics 36:37–47.
 */
export const RIDGE = 1e-6;

/**
 * A design in motion: the inverse information of its sequences, kept up to date while they change.
 *
 * With M = I − J/p, Z the p × m indicators of a participant's effects (t direct ones, then t of
 * carryover when that is in the model), A and B the cross-products of periods with periods and with
 * effects after absorbing participants, the information is C = Σ ZᵀMZ − BᵀA⁺B. V = (C + ridge)⁻¹;
 * the ridge also fills the directions of equal effects, which no difference uses.
 * Every array is row-major. Tables by period have p + 1 columns, the last always zero, so that
 * "no period" is an index like any other.
 */
export interface MovingInformation {
  readonly conditionCount: number;
  readonly periods: number;
  readonly sequenceCount: number;
  /** m, the number of effects: t or 2t. */
  readonly size: number;
  /** p + 1. */
  readonly stride: number;
  /** sequenceCount × p condition indices. */
  readonly sequences: Int32Array;
  readonly given: readonly (readonly number[])[];
  /** W, m × m. */
  readonly weights: Float64Array;
  /** V, m × m. */
  readonly inverse: Float64Array;
  /** Q = V·W·V, m × m. */
  readonly sandwich: Float64Array;
  /** A⁺, p × (p + 1). */
  readonly periodInverse: Float64Array;
  /** M − A⁺, (p + 1) × (p + 1). */
  readonly periodRest: Float64Array;
  /** A⁺B, p × m: what the periods predict of the effects' columns. */
  readonly predicted: Float64Array;
  /** V·(A⁺B)ᵀ and Q·(A⁺B)ᵀ, m × (p + 1). */
  readonly inverseByPeriod: Float64Array;
  readonly sandwichByPeriod: Float64Array;
  /** tr(W·V): the weighted average variance, with the ridge. */
  value: number;
}

/**
 * A design in motion from its sequences.
 *
 * @param sequences sequenceCount × p, row-major, at least one row; modified by moves from now on
 * @param given     further participants who stay as they are
 * @param weights   W, of m² entries with m = t or 2t; see `weightMatrix`
 */
export function movingInformation(
  conditionCount: number,
  periods: number,
  sequences: Int32Array,
  given: readonly (readonly number[])[],
  weights: Float64Array,
): MovingInformation {
  const size = Math.sqrt(weights.length);
  assert(size === conditionCount || size === 2 * conditionCount, 'W has t or 2t rows');
  const stride = periods + 1;
  const moving: MovingInformation = {
    conditionCount,
    periods,
    sequenceCount: sequences.length / periods,
    size,
    stride,
    sequences,
    given,
    weights,
    inverse: new Float64Array(size * size),
    sandwich: new Float64Array(size * size),
    periodInverse: new Float64Array(periods * stride),
    periodRest: new Float64Array(stride * stride),
    predicted: new Float64Array(periods * size),
    inverseByPeriod: new Float64Array(size * stride),
    sandwichByPeriod: new Float64Array(size * stride),
    value: Number.POSITIVE_INFINITY,
  };
  recomputeFromScratch(moving);
  return moving;
}

/** Computes everything anew from the sequences, through `informationOf`. */
export function recomputeFromScratch(moving: MovingInformation): void {
  const { conditionCount, periods, size, stride, sequences, given, weights } = moving;
  const sums = emptyInformationSums(conditionCount, periods);
  for (const sequence of given) addSequenceInto(sums, sequence);
  for (let first = 0; first < sequences.length; first += periods) {
    addSequenceInto(sums, Array.from(sequences.subarray(first, first + periods)));
  }
  const information = informationOf(sums);
  const { values } = size === conditionCount ? information.direct : information.withCarryover;
  const filled = Float64Array.from(values);
  const fill = sums.replication.reduce((sum, count) => sum + count, 0) / conditionCount ** 2;
  for (let row = 0; row < size; row += 1) {
    filled[row * size + row]! += RIDGE;
    const block = row < conditionCount ? 0 : conditionCount;
    for (let column = block; column < block + conditionCount; column += 1) {
      filled[row * size + column]! += fill;
    }
  }
  moving.inverse.set(invertedPositiveDefinite(filled, size));
  moving.sandwich.set(product(product(moving.inverse, weights, size), moving.inverse, size));
  setPeriodTables(moving, sums.byPeriod);
  for (let period = 0; period < periods; period += 1) {
    for (let effect = 0; effect < size; effect += 1) {
      let sum = 0;
      for (let other = 0; other < periods; other += 1) {
        sum +=
          moving.periodInverse[period * stride + other]! *
          sums.effectsByPeriod[effect * periods + other]!;
      }
      moving.predicted[period * size + effect] = sum;
    }
  }
  updatePeriodProducts(moving);
  moving.value = weightedTrace(moving);
}

/** A⁺ = (A + J/p)⁻¹ − J/p: A's rows add up to zero and, with a whole sequence, to nothing else. */
function setPeriodTables(moving: MovingInformation, byPeriod: Float64Array): void {
  const { periods, stride, periodInverse, periodRest } = moving;
  const share = 1 / periods;
  const inverse = invertedPositiveDefinite(
    byPeriod.map((value) => value + share),
    periods,
  );
  for (let row = 0; row < periods; row += 1) {
    for (let column = 0; column < periods; column += 1) {
      const value = inverse[row * periods + column]! - share;
      periodInverse[row * stride + column] = value;
      periodRest[row * stride + column] = (row === column ? 1 : 0) - share - value;
    }
  }
}

/** tr(W·V). */
export function weightedTrace({ weights, inverse }: MovingInformation): number {
  let sum = 0;
  for (let index = 0; index < weights.length; index += 1) {
    sum += weights[index]! * inverse[index]!;
  }
  return sum;
}

/** Sets V·(A⁺B)ᵀ and Q·(A⁺B)ᵀ from V, Q and A⁺B. */
export function updatePeriodProducts(moving: MovingInformation): void {
  const { size, periods, stride, predicted, inverse, sandwich } = moving;
  const { inverseByPeriod, sandwichByPeriod } = moving;
  for (let row = 0; row < size; row += 1) {
    for (let period = 0; period < periods; period += 1) {
      let ofInverse = 0;
      let ofSandwich = 0;
      for (let inner = 0; inner < size; inner += 1) {
        const factor = predicted[period * size + inner]!;
        ofInverse += inverse[row * size + inner]! * factor;
        ofSandwich += sandwich[row * size + inner]! * factor;
      }
      inverseByPeriod[row * stride + period] = ofInverse;
      sandwichByPeriod[row * stride + period] = ofSandwich;
    }
  }
}

/** The inverse of a symmetric positive definite matrix, size × size: L⁻ᵀ·L⁻¹ from A = L·Lᵀ. */
function invertedPositiveDefinite(values: Float64Array, size: number): Float64Array {
  const factor = cholesky({ rows: size, columns: size, values });
  assert(factor !== null, 'information with a ridge is positive definite');
  const lower = factor.values;
  const inverted = new Float64Array(size * size);
  for (let column = 0; column < size; column += 1) {
    inverted[column * size + column] = 1 / lower[column * size + column]!;
    for (let row = column + 1; row < size; row += 1) {
      let sum = 0;
      for (let inner = column; inner < row; inner += 1) {
        sum -= lower[row * size + inner]! * inverted[inner * size + column]!;
      }
      inverted[row * size + column] = sum / lower[row * size + row]!;
    }
  }
  const result = new Float64Array(size * size);
  for (let row = 0; row < size; row += 1) {
    for (let column = 0; column <= row; column += 1) {
      let sum = 0;
      for (let inner = row; inner < size; inner += 1) {
        sum += inverted[inner * size + row]! * inverted[inner * size + column]!;
      }
      result[row * size + column] = sum;
      result[column * size + row] = sum;
    }
  }
  return result;
}

function product(left: Float64Array, right: Float64Array, size: number): Float64Array {
  return multiply(
    { rows: size, columns: size, values: left },
    { rows: size, columns: size, values: right },
  ).values;
}
