import { fisherFSurvival } from '../distributions/fisher-f.ts';
import { DomainError } from '../errors.ts';
import { type Estimable, notEstimable } from '../estimability.ts';
import {
  applyQTranspose,
  householderQr,
  type QrFactorisation,
} from '../numerics/householder-qr.ts';
import { isRoundingOnly, largestMagnitude } from '../numerics/magnitude.ts';
import { columnOf, type Matrix, multiply } from '../numerics/matrix.ts';
import {
  kronecker,
  normalisedConstant,
  orthonormalContrasts,
  subsetsInOrder,
  sumToZeroCode,
} from './coding.ts';
import { type CompleteTable, completeTable } from './repeated-measures-input.ts';
import type {
  AnovaEffect,
  AnovaTest,
  RepeatedMeasuresAnova,
  RepeatedMeasuresOptions,
  RepeatedMeasuresTable,
} from './repeated-measures-types.ts';
import { sphericityOf } from './sphericity.ts';

/**
 * Repeated-measures analysis of variance with any number of within and between factors.
 *
 * Multivariate approach: the cells of each participant are turned into orthonormal contrast scores,
 * one set per within effect, and each set has its own between-participants model and error stratum
 * (Rao 1952; Maxwell & Delaney, Designing Experiments and Analyzing Data, ch. 11–14). Sums of
 * squares are type III: sum-to-zero coding, each effect adjusted for all others, so that unequal
 * groups weigh their cell means equally. Corrections for sphericity as in `sphericityOf`.
 *
 * Generalised eta squared after Olejnik & Algina 2003 (Psychol. Methods 8:434): within factors, and
 * between factors not named in `measuredBetweenFactors`, count as manipulated, so the denominator
 * is the effect, every error stratum, and the other effects that contain a measured factor.
 *
 * @returns per effect a test, or why there is none; no number in it is NaN or infinite
 * @throws {DomainError} when the table contradicts itself, a value is not finite or beyond 1e100,
 *   or a measured factor is not a between factor
 */
export function repeatedMeasuresAnova(
  table: RepeatedMeasuresTable,
  options: RepeatedMeasuresOptions = {},
): RepeatedMeasuresAnova {
  const measured = options.measuredBetweenFactors ?? [];
  for (const key of measured) {
    if (!table.betweenFactors.some((factor) => factor.key === key)) {
      throw new DomainError(`The measured factor ${key} is not a between factor of the table.`);
    }
  }
  const complete = completeTable(table);
  if ('estimable' in complete) return complete;
  const magnitude = largestMagnitude(complete.values.values);
  if (complete.values.values.every((value) => value === complete.values.values[0])) {
    return notEstimable('constant-response', 'Every value of the table is the same.');
  }
  const strata = strataOf(complete, magnitude);
  return {
    estimable: true,
    participants: complete.values.rows,
    groups: complete.groups,
    conditions: complete.values.columns,
    effects: effectsOf(table, strata, measured),
  };
}

/** One set of contrast scores with its error and the sums of squares of its effects. */
interface Stratum {
  readonly within: readonly number[];
  /** Columns of the contrast scores; 0 when a within factor has a single level. */
  readonly contrasts: number;
  readonly participantDegreesOfFreedom: number;
  readonly errorCrossProducts: Matrix;
  readonly errorSumOfSquares: number;
  readonly errorIsRounding: boolean;
  readonly effects: readonly {
    readonly between: readonly number[];
    readonly columns: number;
    readonly sumOfSquares: number;
  }[];
}

/** A between effect, with the factorisation that has its columns last. */
interface BetweenEffect {
  readonly between: readonly number[];
  readonly columns: number;
  readonly qr: QrFactorisation;
}

function strataOf(table: CompleteTable, magnitude: number): Stratum[] {
  const betweenEffects = betweenEffectsOf(table);
  const scored = centredByParticipant(table.values);
  return subsetsInOrder(table.withinLevels.length).map((within) => {
    const contrasts = contrastsFor(within, table.withinLevels);
    const data = within.length === 0 ? centredOverall(table.values) : scored;
    const scores = multiply(data, contrasts);
    return stratumOf({ within, scores, betweenEffects, groups: table.groups, magnitude });
  });
}

/** The orthonormal contrasts of a within effect: cells × degrees of freedom. */
function contrastsFor(within: readonly number[], levels: readonly number[]): Matrix {
  const one: Matrix = { rows: 1, columns: 1, values: Float64Array.of(1) };
  return levels.reduce<Matrix>(
    (product, count, factor) =>
      kronecker(
        product,
        within.includes(factor) ? orthonormalContrasts(count) : normalisedConstant(count),
      ),
    one,
  );
}

function betweenEffectsOf(table: CompleteTable): BetweenEffect[] {
  const effects = subsetsInOrder(table.betweenLevels.length).map((between) => ({
    between,
    columns: between.reduce((product, factor) => product * (table.betweenLevels[factor]! - 1), 1),
    rows: table.groupLevels.map((levels) => productCode(between, levels, table.betweenLevels)),
  }));
  return effects.map((effect) => {
    const others = effects.filter((other) => other !== effect);
    const ordered = [...others, effect];
    const rows = table.groupLevels.map((_, row) => ordered.flatMap((part) => part.rows[row]!));
    const columns = rows[0]!.length;
    const matrix = { rows: rows.length, columns, values: Float64Array.from(rows.flat()) };
    const qr = householderQr(matrix, [columns - effect.columns, effect.columns]);
    return { between: effect.between, columns: effect.columns, qr };
  });
}

/** The columns of a between effect for one participant: products of sum-to-zero codes. */
function productCode(
  between: readonly number[],
  levels: readonly number[],
  counts: readonly number[],
): number[] {
  return between.reduce<number[]>(
    (product, factor) => {
      const code = Array.from(sumToZeroCode(levels[factor]!, counts[factor]!));
      return product.flatMap((value) => code.map((part) => value * part));
    },
    [1],
  );
}

function stratumOf(input: {
  within: readonly number[];
  scores: Matrix;
  betweenEffects: readonly BetweenEffect[];
  groups: number;
  magnitude: number;
}): Stratum {
  const { within, scores, betweenEffects, groups, magnitude } = input;
  const size = scores.columns;
  const nu = scores.rows - groups;
  const columns = Array.from({ length: size }, (_, index) => columnOf(scores, index));
  const residuals = columns.map((column) =>
    applyQTranspose(betweenEffects[0]!.qr, column).subarray(groups),
  );
  const crossProducts = new Float64Array(size * size);
  for (let row = 0; row < size; row += 1) {
    for (let column = 0; column < size; column += 1) {
      crossProducts[row * size + column] = dot(residuals[row]!, residuals[column]!);
    }
  }
  let errorSumOfSquares = 0;
  for (let row = 0; row < size; row += 1) errorSumOfSquares += crossProducts[row * size + row]!;
  const effects = betweenEffects.map(({ between, columns: width, qr }) => {
    let sumOfSquares = 0;
    for (const column of columns) {
      const part = applyQTranspose(qr, column).subarray(groups - width, groups);
      sumOfSquares += dot(part, part);
    }
    return { between, columns: width, sumOfSquares };
  });
  return {
    within,
    contrasts: size,
    participantDegreesOfFreedom: nu,
    errorCrossProducts: { rows: size, columns: size, values: crossProducts },
    errorSumOfSquares,
    errorIsRounding: isRoundingOnly(errorSumOfSquares, nu * size, magnitude),
    effects,
  };
}

function dot(left: Float64Array, right: Float64Array): number {
  let sum = 0;
  for (let index = 0; index < left.length; index += 1) sum += left[index]! * right[index]!;
  return sum;
}

/** Participant means taken off: the contrasts do not see them, and digits are kept. */
function centredByParticipant({ rows, columns, values }: Matrix): Matrix {
  const centred = Float64Array.from(values);
  for (let row = 0; row < rows; row += 1) {
    const cells = centred.subarray(row * columns, (row + 1) * columns);
    const mean = cells.reduce((sum, value) => sum + value, 0) / columns;
    for (let cell = 0; cell < columns; cell += 1) cells[cell]! -= mean;
  }
  return { rows, columns, values: centred };
}

/** The grand mean taken off: the between effects do not see it. */
function centredOverall({ rows, columns, values }: Matrix): Matrix {
  const mean = values.reduce((sum, value) => sum + value, 0) / values.length;
  return { rows, columns, values: values.map((value) => value - mean) };
}

function effectsOf(
  table: RepeatedMeasuresTable,
  strata: readonly Stratum[],
  measured: readonly string[],
): AnovaEffect[] {
  const named = strata.flatMap((stratum) =>
    stratum.effects
      .filter((effect) => stratum.within.length > 0 || effect.between.length > 0)
      .map((effect) => {
        const withinFactors = stratum.within.map((index) => table.withinFactors[index]!.key);
        const betweenFactors = effect.between.map((index) => table.betweenFactors[index]!.key);
        const isMeasured = betweenFactors.some((key) => measured.includes(key));
        return { stratum, ...effect, withinFactors, betweenFactors, isMeasured };
      }),
  );
  const errorTotal = strata.reduce((sum, stratum) => sum + stratum.errorSumOfSquares, 0);
  const measuredTotal = named
    .filter((effect) => effect.isMeasured)
    .reduce((sum, effect) => sum + effect.sumOfSquares, 0);
  return named.map(({ stratum, columns, sumOfSquares, isMeasured, ...factors }) => ({
    factors: [...factors.betweenFactors, ...factors.withinFactors],
    withinFactors: factors.withinFactors,
    betweenFactors: factors.betweenFactors,
    ...testOf(stratum, columns, sumOfSquares, {
      generalisedDenominator: errorTotal + measuredTotal + (isMeasured ? 0 : sumOfSquares),
    }),
  }));
}

function testOf(
  stratum: Stratum,
  betweenColumns: number,
  sumOfSquares: number,
  { generalisedDenominator }: { generalisedDenominator: number },
): Estimable<AnovaTest> {
  const degreesOfFreedom = stratum.contrasts * betweenColumns;
  const errorDegreesOfFreedom = stratum.contrasts * stratum.participantDegreesOfFreedom;
  if (degreesOfFreedom === 0) {
    return notEstimable('too-few-conditions', 'A factor of this effect has a single level.');
  }
  if (stratum.errorIsRounding) {
    return notEstimable(
      'zero-error-variance',
      'The error sum of squares of this effect is zero within rounding.',
    );
  }
  const { errorSumOfSquares } = stratum;
  const fStatistic = sumOfSquares / degreesOfFreedom / (errorSumOfSquares / errorDegreesOfFreedom);
  return {
    estimable: true,
    sumOfSquares,
    degreesOfFreedom,
    errorSumOfSquares,
    errorDegreesOfFreedom,
    fStatistic,
    pValue: fisherFSurvival(fStatistic, degreesOfFreedom, errorDegreesOfFreedom),
    partialEtaSquared: sumOfSquares / (sumOfSquares + errorSumOfSquares),
    generalisedEtaSquared: sumOfSquares / generalisedDenominator,
    sphericity: sphericityOf({
      errorCrossProducts: stratum.errorCrossProducts,
      participantDegreesOfFreedom: stratum.participantDegreesOfFreedom,
      fStatistic,
      degreesOfFreedom,
      errorDegreesOfFreedom,
    }),
  };
}
