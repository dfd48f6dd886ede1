import { DomainError } from '../errors.ts';
import type { Matrix } from '../numerics/matrix.ts';
import { sumToZeroCode } from './coding.ts';
import type { PeriodObservations } from './period-adjusted-types.ts';

/** Columns of one term of the design: the effects of the levels that occur in the data. */
export interface DesignTerm {
  /** Levels there are, with or without observations. */
  readonly levels: number;
  /** Level indices (from 0) that have observations, ascending; the last has no column. */
  readonly observedLevels: readonly number[];
  /** Place of the term's first column in the design. */
  readonly firstColumn: number;
  /** Number of columns, observed levels minus one. */
  readonly columns: number;
}

/**
 * The design with participants absorbed: response and columns have each participant's own mean
 * taken off, which is what fitting one parameter per participant does to the others (Frisch & Waugh
 * 1933). Cost and memory are linear in the observations.
 */
export interface PeriodDesign {
  readonly observations: number;
  /** Participants with observations. */
  readonly participants: number;
  readonly condition: DesignTerm;
  readonly period: DesignTerm | null;
  /** observations × (period columns + condition columns), participant means taken off. */
  readonly matrix: Matrix;
  /** Length observations, participant means taken off. */
  readonly response: Float64Array;
  /** Unweighted over participants: the mean of their mean responses. */
  readonly meanResponse: number;
  /** Unweighted over participants: the mean of their mean design rows. */
  readonly meanRow: Float64Array;
  /** Mean over participants of 1 / their number of observations, divided by participants. */
  readonly meanVarianceFactor: number;
}

/**
 * Builds the design matrix of response ~ participant + condition (+ period): the one place where
 * columns are made. A further term is one more entry here.
 *
 * @throws {DomainError} when arrays differ in length or an index is out of range
 */
export function periodDesign(data: PeriodObservations, withPeriod: boolean): PeriodDesign {
  const observations = data.response.length;
  assertIndices(data.participantIndex, data.participantCount, observations, 'participant');
  assertIndices(data.conditionIndex, data.conditionCount, observations, 'condition');
  assertIndices(data.periodIndex, data.periodCount, observations, 'period');
  const period = withPeriod ? termOf(data.periodIndex, data.periodCount, 0) : null;
  const condition = termOf(data.conditionIndex, data.conditionCount, period?.columns ?? 0);
  const columns = condition.firstColumn + condition.columns;
  const conditionCodes = codesOf(condition);
  const periodCodes = period === null ? [] : codesOf(period);
  const values = new Float64Array(observations * columns);
  for (let row = 0; row < observations; row += 1) {
    if (period !== null) values.set(periodCodes[data.periodIndex[row]!]!, row * columns);
    const conditionColumn = row * columns + condition.firstColumn;
    values.set(conditionCodes[data.conditionIndex[row]!]!, conditionColumn);
  }
  const matrix = { rows: observations, columns, values };
  return { condition, period, ...absorbParticipants(data, matrix) };
}

function assertIndices(
  indices: ArrayLike<number>,
  count: number,
  observations: number,
  what: string,
): void {
  if (indices.length !== observations) {
    throw new DomainError(
      `There are ${indices.length} ${what} indices for ${observations} values.`,
    );
  }
  for (let row = 0; row < observations; row += 1) {
    const index = indices[row]!;
    if (!Number.isInteger(index) || index < 0 || index >= count) {
      throw new DomainError(`Observation ${row} has ${what} index ${index}; there are ${count}.`);
    }
  }
}

function termOf(indices: ArrayLike<number>, levels: number, firstColumn: number): DesignTerm {
  const observedLevels = [...new Set(Array.from(indices))].sort((left, right) => left - right);
  const columns = Math.max(0, observedLevels.length - 1);
  return { levels, observedLevels, firstColumn, columns };
}

/** Sum-to-zero codes by level index; levels without observations have none. */
function codesOf(term: DesignTerm): Float64Array[] {
  const codes: Float64Array[] = new Array(term.levels);
  term.observedLevels.forEach((level, place) => {
    codes[level] = sumToZeroCode(place, term.observedLevels.length);
  });
  return codes;
}

function absorbParticipants(data: PeriodObservations, matrix: Matrix) {
  const { rows: observations, columns, values } = matrix;
  const counts = new Float64Array(data.participantCount);
  const responseMeans = new Float64Array(data.participantCount);
  const rowMeans = new Float64Array(data.participantCount * columns);
  for (let row = 0; row < observations; row += 1) {
    const participant = data.participantIndex[row]!;
    counts[participant]! += 1;
    responseMeans[participant]! += data.response[row]!;
    for (let column = 0; column < columns; column += 1) {
      rowMeans[participant * columns + column]! += values[row * columns + column]!;
    }
  }
  let participants = 0;
  let meanResponse = 0;
  let meanVarianceFactor = 0;
  const meanRow = new Float64Array(columns);
  for (let participant = 0; participant < data.participantCount; participant += 1) {
    const count = counts[participant]!;
    if (count === 0) continue;
    participants += 1;
    responseMeans[participant]! /= count;
    meanResponse += responseMeans[participant]!;
    meanVarianceFactor += 1 / count;
    for (let column = 0; column < columns; column += 1) {
      rowMeans[participant * columns + column]! /= count;
      meanRow[column]! += rowMeans[participant * columns + column]!;
    }
  }
  const response = new Float64Array(observations);
  for (let row = 0; row < observations; row += 1) {
    const participant = data.participantIndex[row]!;
    response[row] = data.response[row]! - responseMeans[participant]!;
    for (let column = 0; column < columns; column += 1) {
      values[row * columns + column]! -= rowMeans[participant * columns + column]!;
    }
  }
  return {
    observations,
    participants,
    matrix,
    response,
    meanResponse: meanResponse / participants,
    meanRow: meanRow.map((value) => value / participants),
    meanVarianceFactor: meanVarianceFactor / participants ** 2,
  };
}

/**
 * Weights on a term's columns for a weighted sum of its levels' effects: the last observed level is
 * minus the sum of the others.
 *
 * @param weightOf weight by level index, of observed levels only
 * @returns length of the design's columns, zero outside the term
 */
export function termWeights(
  design: PeriodDesign,
  term: DesignTerm,
  weightOf: (level: number) => number,
): Float64Array {
  const weights = new Float64Array(design.matrix.columns);
  const last = weightOf(term.observedLevels.at(-1)!);
  for (let place = 0; place < term.columns; place += 1) {
    weights[term.firstColumn + place] = weightOf(term.observedLevels[place]!) - last;
  }
  return weights;
}
