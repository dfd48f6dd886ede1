import { studentTSurvivalQuantile } from '../distributions/student-t.ts';
import { completeTableFault } from '../models/complete-table.ts';
import { assertConfidenceLevel } from '../numerics/confidence-level.ts';
import { largestMagnitude } from '../numerics/magnitude.ts';
import type { Matrix } from '../numerics/matrix.ts';
import type { WithinParticipantIntervals } from './inference-types.ts';

/**
 * Confidence intervals of condition means with the differences among participants taken out.
 *
 * Each participant's mean is replaced by the grand mean (Cousineau 2005), and the variance of a
 * condition's normalised values is multiplied by k/(k − 1), k conditions, since normalising shrinks
 * it (Morey 2008, Tutorials in Quantitative Methods for Psychology 4:61). They show the pattern of
 * the conditions; they are not intervals of a population mean, nor of a single difference.
 *
 * @param table participants × conditions; NaN marks a missing value
 * @returns by condition, in order; or why there is none
 * @throws {DomainError} when a value is infinite or beyond 1e100, or the level not in (0, 1)
 */
export function withinParticipantIntervals(
  table: Matrix,
  confidenceLevel = 0.95,
): WithinParticipantIntervals {
  assertConfidenceLevel(confidenceLevel);
  const { rows: participants, columns: conditions, values } = table;
  const fault = completeTableFault(table);
  if (fault !== null) return fault;
  largestMagnitude(values);
  // The grand mean added back to every value would not change a variance: it is left out.
  const normalised = Float64Array.from(values);
  for (let row = 0; row < participants; row += 1) {
    const own = normalised.subarray(row * conditions, (row + 1) * conditions);
    const mean = own.reduce((sum, value) => sum + value, 0) / conditions;
    for (let column = 0; column < conditions; column += 1) own[column]! -= mean;
  }
  const critical = studentTSurvivalQuantile((1 - confidenceLevel) / 2, participants - 1);
  const correction = conditions / (conditions - 1);
  const results = Array.from({ length: conditions }, (_, column) => {
    const mean = columnMean(values, column, table);
    const centre = columnMean(normalised, column, table);
    let sumOfSquares = 0;
    for (let row = 0; row < participants; row += 1) {
      sumOfSquares += (normalised[row * conditions + column]! - centre) ** 2;
    }
    const variance = (correction * sumOfSquares) / (participants - 1);
    const standardError = Math.sqrt(variance / participants);
    const half = critical * standardError;
    const interval = { level: confidenceLevel, lower: mean - half, upper: mean + half };
    return { mean, standardError, interval };
  });
  return { estimable: true, participants, conditions: results };
}

function columnMean(values: Float64Array, column: number, { rows, columns }: Matrix): number {
  let sum = 0;
  for (let row = 0; row < rows; row += 1) sum += values[row * columns + column]!;
  return sum / rows;
}
