import { assert, DomainError } from '../errors.ts';
import {
  applyQTranspose,
  householderQr,
  type QrFactorisation,
  solveFromQTranspose,
} from '../numerics/householder-qr.ts';
import type { Matrix } from '../numerics/matrix.ts';

/**
 * Cross-products of a set of sequences after participants are absorbed and before periods are. They
 * are sums over participants, so that adding, removing or exchanging a sequence costs (2p)² steps,
 * with p its periods, however many participants there are.
 *
 * Columns 0..t−1 stand for the conditions' direct effects, t..2t−1 for their first-order carryover.
 * With M = I − J/p, which centres within the participant, and Z (p × 2t), T (p × P) the indicators
 * of effects and of periods:
 */
export interface InformationSums {
  readonly conditionCount: number;
  /** The most periods that a sequence may have, P. */
  readonly periods: number;
  /** Σ ZᵀMZ, 2t × 2t, row-major. */
  readonly effects: Float64Array;
  /** Σ ZᵀMT, 2t × P, row-major. */
  readonly effectsByPeriod: Float64Array;
  /** Σ TᵀMT, P × P, row-major. */
  readonly byPeriod: Float64Array;
  /** How many observations each condition has: its direct replication, rᵢ. */
  readonly replication: Float64Array;
}

/** Sums over no participant yet. */
export function emptyInformationSums(conditionCount: number, periods: number): InformationSums {
  for (const [name, count] of Object.entries({ conditionCount, periods })) {
    if (!Number.isSafeInteger(count) || count < 1) {
      throw new DomainError(`${name} is a whole number of at least 1, not ${count}`);
    }
  }
  const columns = 2 * conditionCount;
  return {
    conditionCount,
    periods,
    effects: new Float64Array(columns * columns),
    effectsByPeriod: new Float64Array(columns * periods),
    byPeriod: new Float64Array(periods * periods),
    replication: new Float64Array(conditionCount),
  };
}

/**
 * Adds participants who received a sequence, or the beginning of one before they withdrew, to the
 * sums, in place. The first period has no carryover; later periods have that of the one before.
 *
 * @param sequence condition indices from period 1 on without a gap, at most `periods` of them; an
 *   empty one adds nothing
 * @param weight   how many such participants; negative to take them away again, which leaves
 *   rounding of about 1e-16 of what was there
 * @throws {DomainError} when the sequence is too long or an index is out of range
 */
export function addSequenceInto(
  sums: InformationSums,
  sequence: readonly number[],
  weight = 1,
): void {
  const { conditionCount, periods, effects, effectsByPeriod, byPeriod, replication } = sums;
  const length = sequence.length;
  if (length > periods) {
    throw new DomainError(`A sequence has ${length} periods, the design ${periods}`);
  }
  const columns = 2 * conditionCount;
  // The columns that are 1 in each period: the direct one, then the carryover one if there is one.
  const ones = sequence.map((condition, periodIndex) => {
    if (!Number.isInteger(condition) || condition < 0 || condition >= conditionCount) {
      throw new DomainError(`A sequence names condition index ${condition} of ${conditionCount}`);
    }
    const before = sequence[periodIndex - 1];
    return before === undefined ? [condition] : [condition, conditionCount + before];
  });
  // Centring within a participant takes the product of the column totals over p away.
  const all = ones.flat();
  const share = weight / length;
  for (const row of all) {
    for (const column of all) effects[row * columns + column]! -= share;
    for (let period = 0; period < length; period += 1) {
      effectsByPeriod[row * periods + period]! -= share;
    }
  }
  for (const [period, here] of ones.entries()) {
    for (const row of here) {
      for (const column of here) effects[row * columns + column]! += weight;
      effectsByPeriod[row * periods + period]! += weight;
    }
    for (let other = 0; other < length; other += 1) byPeriod[period * periods + other]! -= share;
    byPeriod[period * periods + period]! += weight;
    replication[sequence[period]!]! += weight;
  }
}

/** Information about the effects with participants and periods fixed, in units of 1/σ². */
export interface DesignInformation {
  readonly conditionCount: number;
  /** Observations of each condition, rᵢ. */
  readonly replication: Float64Array;
  /** t × t: direct effects, no carryover in the model. */
  readonly direct: Matrix;
  /** 2t × 2t: direct effects, then first-order carryover effects. */
  readonly withCarryover: Matrix;
}

/** Entries below this share of the largest cross-product are rounding of what is exactly zero. */
const ROUNDING_SHARE = 1e-11;

/**
 * The information matrices of the sums, with periods absorbed too: Σ ZᵀMZ − B·A⁻·Bᵀ with
 * B = Σ ZᵀMT and A = Σ TᵀMT.
 * Source: Jones & Kenward, Design and Analysis of Cross-Over Trials, §3.4; absorption of a
 * partition of the normal equations, Searle, Linear Models, 1971, §7.1.
 */
export function informationOf(sums: InformationSums): DesignInformation {
  const { conditionCount, periods, effects, effectsByPeriod, byPeriod } = sums;
  const columns = 2 * conditionCount;
  const largest = effects.reduce((most, value) => Math.max(most, Math.abs(value)), 0);
  // A has rank (periods reached) − 1 at most; a dropped column gets 0, which is one choice of A⁻.
  const periodQr = householderQr({
    rows: periods,
    columns: periods,
    values: byPeriod.map((value) => (Math.abs(value) <= ROUNDING_SHARE * largest ? 0 : value)),
  });
  const values = Float64Array.from(effects);
  for (let row = 0; row < columns; row += 1) {
    const crossed = effectsByPeriod.subarray(row * periods, (row + 1) * periods);
    const solved = solveFromQTranspose(periodQr, applyQTranspose(periodQr, crossed));
    for (let column = 0; column <= row; column += 1) {
      let absorbed = 0;
      for (let period = 0; period < periods; period += 1) {
        absorbed += solved[period]! * effectsByPeriod[column * periods + period]!;
      }
      const rest = values[row * columns + column]! - absorbed;
      const kept = Math.abs(rest) <= ROUNDING_SHARE * largest ? 0 : rest;
      values[row * columns + column] = kept;
      values[column * columns + row] = kept;
    }
  }
  const direct = Float64Array.from(
    { length: conditionCount * conditionCount },
    (_, index) => values[Math.floor(index / conditionCount) * columns + (index % conditionCount)]!,
  );
  return {
    conditionCount,
    replication: Float64Array.from(sums.replication),
    direct: { rows: conditionCount, columns: conditionCount, values: direct },
    withCarryover: { rows: columns, columns, values },
  };
}

/**
 * The information of a set of sequences, one participant each.
 *
 * @param sequences      rows of condition indices 0..conditionCount−1; a row that ends early is a
 *   participant who withdrew
 * @param conditionCount t, including conditions that no sequence presents
 * @throws {DomainError} when no sequence has a period or an index is out of range
 */
export function designInformation(
  sequences: readonly (readonly number[])[],
  conditionCount: number,
): DesignInformation {
  const periods = sequences.reduce((most, { length }) => Math.max(most, length), 0);
  if (periods === 0) throw new DomainError('A design needs at least one sequence and one period');
  const sums = emptyInformationSums(conditionCount, periods);
  for (const sequence of sequences) addSequenceInto(sums, sequence);
  return informationOf(sums);
}

/**
 * The variance of a difference of two effects in units of σ², by solving C·x = w with w = +1 at one
 * effect and −1 at the other; null when the sequences do not determine it. The difference can be
 * estimated when w lies in the column space of C (Searle, Linear Models, 1971, §5.4), that is when
 * what Q leaves of w below the rank is rounding.
 *
 * @param qr    of an information matrix C
 * @param first, second indices of columns of C
 */
export function differenceVariance(
  qr: QrFactorisation,
  first: number,
  second: number,
): number | null {
  assert(first !== second, 'a difference is between two effects');
  const weights = new Float64Array(qr.rows);
  weights[first] = 1;
  weights[second] = -1;
  const rotated = applyQTranspose(qr, weights);
  for (let row = qr.rank; row < qr.rows; row += 1) {
    if (Math.abs(rotated[row]!) > OUTSIDE_TOLERANCE) return null;
  }
  const solution = solveFromQTranspose(qr, rotated);
  return solution[first]! - solution[second]!;
}

/**
 * How much of a weight vector of length √2 may lie outside the column space. Rounding leaves about
 * 1e-14; a difference that cannot be estimated leaves at least about 1/columns.
 */
const OUTSIDE_TOLERANCE = 1e-8;
