import {
  type MovingInformation,
  updatePeriodProducts,
  weightedTrace,
} from './moving-information.ts';
import type { SequenceRules } from './sequence-rules.ts';

/**
 * What one participant's moves are weighed with; filled by {@link visitParticipant}.
 *
 * A move puts condition y in the place of x in one period and, when it exchanges two periods, x in
 * the place of y in another. It alters Z by P·L, where L holds the difference y − x among direct
 * and among carryover columns and P says in which periods (carryover: in the next). With
 * G = M·Z − A⁺B, the information changes by LᵀPᵀG + GᵀPL + LᵀPᵀ(M − A⁺)PL, of rank 2 or 4, so that
 * everything about it is a difference of entries of the tables below.
 */
export interface Visit {
  readonly moving: MovingInformation;
  /** The participant's row of `moving.sequences`, a view. */
  sequence: Int32Array;
  /** V·Gᵀ and Q·Gᵀ, m × (p + 1). */
  readonly inverseG: Float64Array;
  readonly sandwichG: Float64Array;
  /** G·V·Gᵀ and G·Q·Gᵀ, (p + 1) × (p + 1). */
  readonly inverseGG: Float64Array;
  readonly sandwichGG: Float64Array;
  /** Of the move weighed last: factors of the elimination, rank × rank, and its pivots. */
  readonly core: Float64Array;
  readonly coreSandwich: Float64Array;
  readonly pivots: Float64Array;
  /** Room for the columns of V·U, rank × m, and for two products of a matrix with a vector. */
  readonly columns: Float64Array;
  readonly weighted: Float64Array;
  readonly carried: Float64Array;
}

/** Room for visits to the participants of a design, none visited yet. */
export function emptyVisit(moving: MovingInformation): Visit {
  const { size, stride, sequences } = moving;
  return {
    moving,
    sequence: sequences.subarray(0, 0),
    inverseG: new Float64Array(size * stride),
    sandwichG: new Float64Array(size * stride),
    inverseGG: new Float64Array(stride * stride),
    sandwichGG: new Float64Array(stride * stride),
    core: new Float64Array(16),
    coreSandwich: new Float64Array(16),
    pivots: new Float64Array(4),
    columns: new Float64Array(4 * size),
    weighted: new Float64Array(size),
    carried: new Float64Array(size),
  };
}

/** Fills the tables for one participant; to be repeated after each {@link applyMove}. */
export function visitParticipant(visit: Visit, participant: number): void {
  const { moving } = visit;
  const { periods, sequences } = moving;
  visit.sequence = sequences.subarray(participant * periods, (participant + 1) * periods);
  fillTables(visit, moving.inverse, moving.inverseByPeriod, visit.inverseG, visit.inverseGG);
  fillTables(visit, moving.sandwich, moving.sandwichByPeriod, visit.sandwichG, visit.sandwichGG);
}

/** X·Gᵀ and G·X·Gᵀ for a symmetric m × m matrix X, of which X·(A⁺B)ᵀ is known. */
function fillTables(
  visit: Visit,
  matrix: Float64Array,
  byPeriod: Float64Array,
  matrixG: Float64Array,
  matrixGG: Float64Array,
): void {
  const { sequence } = visit;
  const { conditionCount, periods, size, stride, predicted } = visit.moving;
  const withCarryover = size > conditionCount;
  for (let row = 0; row < size; row += 1) {
    let sum = 0;
    for (let period = 0; period < periods; period += 1) {
      let value = matrix[row * size + sequence[period]!]!;
      if (withCarryover && period > 0) {
        value += matrix[row * size + conditionCount + sequence[period - 1]!]!;
      }
      sum += value;
      matrixG[row * stride + period] = value - byPeriod[row * stride + period]!;
    }
    const mean = sum / periods;
    for (let period = 0; period < periods; period += 1) matrixG[row * stride + period]! -= mean;
  }
  for (let column = 0; column < periods; column += 1) {
    let sum = 0;
    for (let period = 0; period < periods; period += 1) {
      let value = matrixG[sequence[period]! * stride + column]!;
      if (withCarryover && period > 0) {
        value += matrixG[(conditionCount + sequence[period - 1]!) * stride + column]!;
      }
      sum += value;
      matrixGG[period * stride + column] = value;
    }
    const mean = sum / periods;
    for (let period = 0; period < periods; period += 1) matrixGG[period * stride + column]! -= mean;
  }
  for (let period = 0; period < periods; period += 1) {
    for (let inner = 0; inner < size; inner += 1) {
      const factor = predicted[period * size + inner]!;
      for (let column = 0; column < periods; column += 1) {
        matrixGG[period * stride + column]! -= factor * matrixG[inner * stride + column]!;
      }
    }
  }
}

/** Entry [r1, c1] − [r1, c2] − [r2, c1] + [r2, c2] of a table. */
function cross(
  table: Float64Array,
  stride: number,
  r1: number,
  r2: number,
  c1: number,
  c2: number,
): number {
  const first = r1 * stride;
  const second = r2 * stride;
  return table[first + c1]! - table[first + c2]! - table[second + c1]! + table[second + c2]!;
}

/**
 * The criterion after a move of the participant visited; Infinity where rounding has eaten the
 * answer. Leaves what {@link applyMove} needs in the visit.
 *
 * With V the inverse of C, (C + USUᵀ)⁻¹ = V − VU(S⁻¹ + UᵀVU)⁻¹UᵀV (Woodbury), where U = [Lᵀ, GᵀP]
 * and S⁻¹ = [[0, I], [I, −Pᵀ(M − A⁺)P]]. The small matrix has as many negative eigenvalues as
 * positive ones, the first half of its pivots positive, so that elimination needs no exchange.
 *
 * @param period  whose condition is replaced
 * @param partner the period to exchange it with, or p for none
 * @param next    the condition that comes to `period`; for an exchange, that of `partner`
 */
export function valueAfter(visit: Visit, period: number, partner: number, next: number): number {
  const { moving, core, coreSandwich } = visit;
  const { conditionCount, periods, size, stride, periodRest } = moving;
  const { inverse, sandwich } = moving;
  const last = visit.sequence[period]!;
  const half = size > conditionCount ? 2 : 1;
  for (let one = 0; one < half; one += 1) {
    const rowPlus = one === 0 ? next : conditionCount + next;
    const rowMinus = one === 0 ? last : conditionCount + last;
    const onePlus = Math.min(period + one, periods);
    const oneMinus = Math.min(partner + one, periods);
    for (let two = 0; two < half; two += 1) {
      const plus = two === 0 ? next : conditionCount + next;
      const minus = two === 0 ? last : conditionCount + last;
      const twoPlus = Math.min(period + two, periods);
      const twoMinus = Math.min(partner + two, periods);
      const low = 4 * (half + one) + two;
      core[4 * one + two] = cross(inverse, size, rowPlus, rowMinus, plus, minus);
      coreSandwich[4 * one + two] = cross(sandwich, size, rowPlus, rowMinus, plus, minus);
      core[low] =
        cross(visit.inverseG, stride, plus, minus, onePlus, oneMinus) + (one === two ? 1 : 0);
      coreSandwich[low] = cross(visit.sandwichG, stride, plus, minus, onePlus, oneMinus);
      core[low + half] =
        cross(visit.inverseGG, stride, onePlus, oneMinus, twoPlus, twoMinus) -
        cross(periodRest, stride, onePlus, oneMinus, twoPlus, twoMinus);
      coreSandwich[low + half] = cross(
        visit.sandwichGG,
        stride,
        onePlus,
        oneMinus,
        twoPlus,
        twoMinus,
      );
    }
  }
  return moving.value - tracedByElimination(visit, half);
}

/** Pivots nearer to zero than this are rounding. */
const PIVOT_MIN = 1e-12;

/**
 * tr(core⁻¹·coreSandwich) by eliminating both at once, the lower triangles only; −Infinity when a
 * pivot has not the sign it must have. Leaves the factors below core's diagonal.
 */
function tracedByElimination(visit: Visit, half: number): number {
  const { core, coreSandwich, pivots } = visit;
  const rank = 2 * half;
  let trace = 0;
  for (let step = 0; step < rank; step += 1) {
    const pivot = core[5 * step]!;
    if (step < half ? !(pivot > PIVOT_MIN) : !(pivot < -PIVOT_MIN)) {
      return Number.NEGATIVE_INFINITY;
    }
    pivots[step] = pivot;
    const corner = coreSandwich[5 * step]!;
    trace += corner / pivot;
    for (let row = step + 1; row < rank; row += 1) {
      const factor = core[4 * row + step]! / pivot;
      for (let column = step + 1; column <= row; column += 1) {
        const other = core[4 * column + step]! / pivot;
        core[4 * row + column]! -= factor * core[4 * column + step]!;
        coreSandwich[4 * row + column]! -=
          factor * coreSandwich[4 * column + step]! +
          other * coreSandwich[4 * row + step]! -
          factor * other * corner;
      }
    }
    for (let row = step + 1; row < rank; row += 1) core[4 * row + step]! /= pivot;
  }
  return trace;
}

/**
 * Makes a move of the participant visited: V and Q by 2 or 4 rank-one updates, then what hangs on
 * them. The tables of the visit are out of date afterwards.
 */
export function applyMove(visit: Visit, period: number, partner: number, next: number): void {
  valueAfter(visit, period, partner, next);
  const { moving, sequence, columns, core, pivots } = visit;
  const { conditionCount, periods, size, stride, inverse, predicted, periodInverse } = moving;
  const last = sequence[period]!;
  const half = size > conditionCount ? 2 : 1;
  for (let one = 0; one < half; one += 1) {
    const plus = one === 0 ? next : conditionCount + next;
    const minus = one === 0 ? last : conditionCount + last;
    const onePlus = Math.min(period + one, periods);
    const oneMinus = Math.min(partner + one, periods);
    for (let row = 0; row < size; row += 1) {
      columns[one * size + row] = inverse[row * size + plus]! - inverse[row * size + minus]!;
      columns[(half + one) * size + row] =
        visit.inverseG[row * stride + onePlus]! - visit.inverseG[row * stride + oneMinus]!;
    }
    for (let row = 0; row < periods; row += 1) {
      const shift =
        periodInverse[row * stride + onePlus]! - periodInverse[row * stride + oneMinus]!;
      predicted[row * size + plus]! += shift;
      predicted[row * size + minus]! -= shift;
    }
  }
  for (let step = 0; step < 2 * half; step += 1) {
    for (let later = step + 1; later < 2 * half; later += 1) {
      const factor = core[4 * later + step]!;
      for (let row = 0; row < size; row += 1) {
        columns[later * size + row]! -= factor * columns[step * size + row]!;
      }
    }
    subtractRankOne(visit, columns.subarray(step * size, (step + 1) * size), pivots[step]!);
  }
  sequence[period] = next;
  if (partner < periods) sequence[partner] = last;
  updatePeriodProducts(moving);
  moving.value = weightedTrace(moving);
}

/** V ← V − vvᵀ/pivot, and Q = V·W·V with it. */
function subtractRankOne(visit: Visit, vector: Float64Array, pivot: number): void {
  const { weighted, carried } = visit;
  const { size, inverse, sandwich, weights } = visit.moving;
  multiplyInto(weighted, weights, vector);
  multiplyInto(carried, inverse, weighted);
  let square = 0;
  for (let row = 0; row < size; row += 1) square += vector[row]! * weighted[row]!;
  const corner = square / (pivot * pivot);
  for (let row = 0; row < size; row += 1) {
    const left = vector[row]!;
    const ofCarried = left / pivot;
    const ofVector = carried[row]! / pivot - left * corner;
    for (let column = 0; column < size; column += 1) {
      const right = vector[column]!;
      sandwich[row * size + column]! -= ofCarried * carried[column]! + ofVector * right;
      inverse[row * size + column]! -= ofCarried * right;
    }
  }
}

function multiplyInto(target: Float64Array, matrix: Float64Array, vector: Float64Array): void {
  const size = target.length;
  for (let row = 0; row < size; row += 1) {
    let sum = 0;
    for (let column = 0; column < size; column += 1) {
      sum += matrix[row * size + column]! * vector[column]!;
    }
    target[row] = sum;
  }
}

/** Whether a sequence that keeps the rules keeps them after the move; parameters as above. */
export function moveKeepsRules(
  sequence: Int32Array,
  rules: SequenceRules,
  period: number,
  partner: number,
  next: number,
): boolean {
  const { periods, conditionCount, timesMax, allowedIn, required } = rules;
  const last = sequence[period]!;
  if (allowedIn[period * conditionCount + next] !== 1) return false;
  if (partner === periods) {
    if (timesMax < periods && timesOf(sequence, next) >= timesMax) return false;
    if (required.includes(last) && timesOf(sequence, last) === 1) return false;
  } else if (allowedIn[partner * conditionCount + last] !== 1) return false;
  sequence[period] = next;
  if (partner < periods) sequence[partner] = last;
  const kept =
    neighboursKeepRules(sequence, rules, period) &&
    (partner === periods || neighboursKeepRules(sequence, rules, partner));
  if (partner < periods) sequence[partner] = next;
  sequence[period] = last;
  return kept;
}

function timesOf(sequence: Int32Array, condition: number): number {
  let times = 0;
  for (let period = 0; period < sequence.length; period += 1) {
    if (sequence[period] === condition) times += 1;
  }
  return times;
}

function neighboursKeepRules(sequence: Int32Array, rules: SequenceRules, period: number): boolean {
  const { mayFollow, conditionCount, periods } = rules;
  const here = sequence[period]!;
  return (
    (period === 0 || mayFollow[sequence[period - 1]! * conditionCount + here] === 1) &&
    (period === periods - 1 || mayFollow[here * conditionCount + sequence[period + 1]!] === 1)
  );
}
