import { DomainError } from '../errors.ts';
import { type NotEstimable, notEstimable } from '../estimability.ts';
import type { Matrix } from '../numerics/matrix.ts';
import type { RepeatedMeasuresTable, TableFactor } from './repeated-measures-types.ts';

/** A checked, complete table: numbers in place of keys. */
export interface CompleteTable {
  /** participants × cells */
  readonly values: Matrix;
  readonly withinLevels: readonly number[];
  readonly betweenLevels: readonly number[];
  /** By participant, the level index (from 0) of each between factor. */
  readonly groupLevels: readonly (readonly number[])[];
  readonly groups: number;
}

/**
 * Checks a table and turns keys into indices.
 *
 * @returns the complete table, or why it cannot be analysed
 * @throws {DomainError} when the table contradicts itself: a wrong number of values or level keys,
 *   an unknown level, a key given twice
 */
export function completeTable(table: RepeatedMeasuresTable): CompleteTable | NotEstimable {
  const { withinFactors, betweenFactors, participants } = table;
  const factors = [...withinFactors, ...betweenFactors];
  assertDistinct(
    factors.map((factor) => factor.key),
    'factor',
  );
  for (const factor of factors) assertDistinct(factor.levelKeys, `level of ${factor.key}`);
  assertDistinct(
    participants.map((participant) => participant.key),
    'participant',
  );
  const withinLevels = withinFactors.map((factor) => factor.levelKeys.length);
  const betweenLevels = betweenFactors.map((factor) => factor.levelKeys.length);
  const cells = withinLevels.reduce((product, levels) => product * levels, 1);
  const values = new Float64Array(participants.length * cells);
  const incomplete: string[] = [];
  participants.forEach((participant, row) => {
    if (participant.values.length !== cells) {
      const given = participant.values.length;
      throw new DomainError(
        `Participant ${participant.key} has ${given} values for ${cells} cells.`,
      );
    }
    if (participant.values.some((value) => value === null)) incomplete.push(participant.key);
    participant.values.forEach((value, cell) => {
      values[row * cells + cell] = value ?? 0;
    });
  });
  const groupLevels = participants.map((participant) =>
    levelIndices(participant.key, participant.betweenLevelKeys, betweenFactors),
  );
  const groups = new Set(groupLevels.map((levels) => levels.join('.'))).size;
  const fault = faultOf({ cells, participants: participants.length, incomplete, groups });
  if (fault !== null) return fault;
  const cellsBetween = betweenLevels.reduce((product, levels) => product * levels, 1);
  if (groups < cellsBetween) {
    return notEstimable(
      'empty-between-cell',
      `Only ${groups} of ${cellsBetween} combinations of between-factor levels have participants.`,
    );
  }
  const matrix = { rows: participants.length, columns: cells, values };
  return { values: matrix, withinLevels, betweenLevels, groupLevels, groups };
}

interface Counts {
  readonly cells: number;
  readonly participants: number;
  readonly incomplete: readonly string[];
  readonly groups: number;
}

function faultOf({ cells, participants, incomplete, groups }: Counts): NotEstimable | null {
  if (cells < 2) {
    return notEstimable('too-few-conditions', `Two conditions are needed; there are ${cells}.`);
  }
  if (participants < 2) {
    return notEstimable(
      'too-few-participants',
      `Two participants are needed; there are ${participants}.`,
    );
  }
  if (incomplete.length > 0) {
    return notEstimable(
      'incomplete-data',
      `${incomplete.length} of ${participants} participants lack a value in some cell.`,
    );
  }
  if (participants <= groups) {
    return notEstimable(
      'no-error-degrees-of-freedom',
      `${participants} participants in ${groups} groups leave nothing to estimate error from.`,
    );
  }
  return null;
}

function assertDistinct(keys: readonly string[], what: string): void {
  const seen = new Set<string>();
  const repeated = keys.find((key) => seen.size === seen.add(key).size);
  if (repeated !== undefined) throw new DomainError(`The ${what} ${repeated} is given twice.`);
}

function levelIndices(
  participantKey: string,
  levelKeys: readonly string[],
  factors: readonly TableFactor[],
): number[] {
  if (levelKeys.length !== factors.length) {
    throw new DomainError(
      `Participant ${participantKey} has ${levelKeys.length} levels for ${factors.length} factors.`,
    );
  }
  return factors.map((factor, index) => {
    const level = factor.levelKeys.indexOf(levelKeys[index]!);
    if (level < 0) {
      throw new DomainError(
        `Participant ${participantKey} has the unknown level ${levelKeys[index]} of ${factor.key}.`,
      );
    }
    return level;
  });
}
