import { DomainError } from '../errors.ts';
import type { Matrix } from './matrix.ts';

/**
 * A Householder QR factorisation X·P = Q·R with columns pivoted inside successive groups.
 *
 * The columns of a later group never move before an earlier group's, so that the rows of Qᵀy which
 * belong to a group hold its sum of squares adjusted for all groups before it.
 */
export interface QrFactorisation {
  readonly rows: number;
  readonly columns: number;
  readonly rank: number;
  /** Columns of X kept as linearly independent, in the order of R's columns; length `rank`. */
  readonly kept: readonly number[];
  /** Columns of X that are linear combinations of kept ones within the tolerance, ascending. */
  readonly dropped: readonly number[];
  /** Rank contributed by each group. */
  readonly groupRanks: readonly number[];
  /** rank × rank, upper triangular, row-major. */
  readonly r: Float64Array;
  /** rank × dropped.length, row-major: the dropped columns in terms of Q. */
  readonly rDropped: Float64Array;
  /** Householder vectors, `rank` of them, each of length rows (zero above its own row). */
  readonly reflectors: readonly Float64Array[];
}

/**
 * A column whose norm, once the kept columns are projected out, is below this fraction of what it
 * was counts as dependent. Design columns are small whole numbers with participant means taken off:
 * what is left of a dependent one is rounding, about 1e-15; of an independent one, at least 1/rows.
 */
export const RANK_TOLERANCE = 1e-9;

/**
 * Factorises X and decides its rank, as LINPACK's `dqrdc` does with pivoting limited to groups.
 * Cost: rows · columns². Source: Golub & Van Loan, Matrix Computations, 4th ed., §5.2 and §5.4.2.
 *
 * @param matrix     n × p; not modified
 * @param groupSizes numbers of columns by group, adding up to p; default: one group
 * @param tolerance  see {@link RANK_TOLERANCE}
 * @throws {DomainError} when a value is not finite or the groups do not add up
 */
export function householderQr(
  matrix: Matrix,
  groupSizes: readonly number[] = [matrix.columns],
  tolerance = RANK_TOLERANCE,
): QrFactorisation {
  const { rows, columns } = matrix;
  if (groupSizes.reduce((sum, size) => sum + size, 0) !== columns) {
    throw new DomainError(`The groups ${groupSizes.join(' + ')} do not add up to ${columns}.`);
  }
  if (!matrix.values.every(Number.isFinite)) throw new DomainError('A matrix holds a non-number.');
  const work = Array.from({ length: columns }, (_, column) =>
    Float64Array.from({ length: rows }, (_, row) => matrix.values[row * columns + column]!),
  );
  const originalNorms = work.map((column) => normFrom(column, 0));
  const kept: number[] = [];
  const dropped: number[] = [];
  const groupRanks: number[] = [];
  const reflectors: Float64Array[] = [];
  let first = 0;
  for (const size of groupSizes) {
    const candidates = Array.from({ length: size }, (_, index) => first + index);
    const rankBefore = kept.length;
    for (;;) {
      const step = kept.length;
      const pivot = largestRemaining(work, originalNorms, candidates, step, tolerance);
      if (pivot === undefined) break;
      candidates.splice(candidates.indexOf(pivot), 1);
      const reflector = reflectorFor(work[pivot]!, step);
      for (const column of work.keys()) {
        if (!kept.includes(column)) reflectInto(work[column]!, reflector, step);
      }
      kept.push(pivot);
      reflectors.push(reflector);
    }
    dropped.push(...candidates);
    groupRanks.push(kept.length - rankBefore);
    first += size;
  }
  const rank = kept.length;
  const r = new Float64Array(rank * rank);
  for (let row = 0; row < rank; row += 1) {
    for (let column = row; column < rank; column += 1) {
      r[row * rank + column] = work[kept[column]!]![row]!;
    }
  }
  const rDropped = Float64Array.from(
    { length: rank * dropped.length },
    (_, index) => work[dropped[index % dropped.length]!]![Math.floor(index / dropped.length)]!,
  );
  return { rows, columns, rank, kept, dropped, groupRanks, r, rDropped, reflectors };
}

function normFrom(column: Float64Array, start: number): number {
  let scale = 0;
  for (let row = start; row < column.length; row += 1) {
    scale = Math.max(scale, Math.abs(column[row]!));
  }
  if (scale === 0) return 0;
  let sum = 0;
  for (let row = start; row < column.length; row += 1) sum += (column[row]! / scale) ** 2;
  return scale * Math.sqrt(sum);
}

/** The candidate with most of its norm left, if that is more than the tolerance. */
function largestRemaining(
  work: readonly Float64Array[],
  originalNorms: readonly number[],
  candidates: readonly number[],
  step: number,
  tolerance: number,
): number | undefined {
  let best: number | undefined;
  let bestShare = tolerance;
  for (const column of candidates) {
    const original = originalNorms[column]!;
    const share = original === 0 ? 0 : normFrom(work[column]!, step) / original;
    // Strictly greater, with a margin: among equals the first column is taken, whatever the
    // rounding, so that the same columns are dropped when rows are permuted.
    if (share > bestShare * (1 + 1e-9)) {
      best = column;
      bestShare = share;
    }
  }
  return best;
}

/** The unit vector v, zero above `step`, with (I − 2vvᵀ)·column zero below `step`. */
function reflectorFor(column: Float64Array, step: number): Float64Array {
  const vector = new Float64Array(column.length);
  for (let row = step; row < column.length; row += 1) vector[row] = column[row]!;
  const norm = normFrom(column, step);
  vector[step]! += column[step]! >= 0 ? norm : -norm;
  const length = normFrom(vector, step);
  for (let row = step; row < vector.length; row += 1) vector[row]! /= length;
  return vector;
}

function reflectInto(target: Float64Array, reflector: Float64Array, step: number): void {
  let product = 0;
  for (let row = step; row < target.length; row += 1) product += reflector[row]! * target[row]!;
  for (let row = step; row < target.length; row += 1) target[row]! -= 2 * product * reflector[row]!;
}

/** Qᵀy as a new vector of length rows; y is not modified. */
export function applyQTranspose(qr: QrFactorisation, y: Float64Array): Float64Array {
  if (y.length !== qr.rows) {
    throw new DomainError(`The response has ${y.length} values, the design ${qr.rows} rows.`);
  }
  const result = Float64Array.from(y);
  qr.reflectors.forEach((reflector, step) => {
    reflectInto(result, reflector, step);
  });
  return result;
}

/**
 * Least-squares coefficients for all columns of X, in X's order, from Qᵀy; dropped columns get 0.
 */
export function solveFromQTranspose(qr: QrFactorisation, qty: Float64Array): Float64Array {
  const solution = new Float64Array(qr.columns);
  for (let row = qr.rank - 1; row >= 0; row -= 1) {
    let value = qty[row]!;
    for (let column = row + 1; column < qr.rank; column += 1) {
      value -= qr.r[row * qr.rank + column]! * solution[qr.kept[column]!]!;
    }
    solution[qr.kept[row]!] = value / qr.r[row * qr.rank + row]!;
  }
  return solution;
}

/**
 * For a linear combination wᵀβ: whether the data determine it, and wᵀ(XᵀX)⁻w, its variance over
 * σ². It is estimable when w lies in the row space of X: when each dropped column's part of w is
 * what the kept columns make of it (Searle, Linear Models, 1971, §5.4).
 *
 * @param weights length columns, in X's order
 */
export function linearCombination(
  qr: QrFactorisation,
  weights: Float64Array,
): { readonly determined: boolean; readonly varianceFactor: number } {
  // Solve Rᵀz = w on the kept columns; then the variance factor is ‖z‖².
  const z = new Float64Array(qr.rank);
  for (let row = 0; row < qr.rank; row += 1) {
    let value = weights[qr.kept[row]!]!;
    for (let before = 0; before < row; before += 1) {
      value -= qr.r[before * qr.rank + row]! * z[before]!;
    }
    z[row] = value / qr.r[row * qr.rank + row]!;
  }
  // Rounding is judged against ‖z‖ times the dropped column's length, not against the terms of the
  // sum: those may all be rounding themselves where a column is orthogonal to the combination.
  const zNorm = normFrom(z, 0);
  let determined = true;
  qr.dropped.forEach((column, index) => {
    let implied = 0;
    let squares = 0;
    for (let row = 0; row < qr.rank; row += 1) {
      const entry = qr.rDropped[row * qr.dropped.length + index]!;
      implied += z[row]! * entry;
      squares += entry * entry;
    }
    const size = Math.abs(weights[column]!) + zNorm * Math.sqrt(squares);
    if (Math.abs(implied - weights[column]!) > 1e-7 * size) determined = false;
  });
  return { determined, varianceFactor: z.reduce((sum, value) => sum + value * value, 0) };
}
