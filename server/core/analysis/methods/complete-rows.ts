import { type ConditionRow, conditionRows } from '../cell-summaries.ts';
import type { CellSummary, LeftOut } from '../result-types.ts';
import type { MethodInput } from './method.ts';

/** A row without a gap. */
export interface CompleteRow extends ConditionRow {
  readonly cells: readonly number[];
}

/**
 * The participants a method that needs every condition can use, and those it cannot, by condition
 * missing.
 *
 * @param cleaned applied to each cell
 * @returns all rows with any value, the complete ones among them, and the account of the others
 */
export function completeRows(
  { data, participants }: MethodInput,
  summary: CellSummary,
  cleaned: (cell: number) => number = (cell) => cell,
): { rows: ConditionRow[]; complete: CompleteRow[]; leftOut: LeftOut } {
  const conditionKeys = data.conditions.map(({ key }) => key);
  const rows = conditionRows(participants, conditionKeys, summary).map(
    ({ participant, cells }): ConditionRow => ({
      participant,
      cells: cells.map((cell) => (cell === null ? null : cleaned(cell))),
    }),
  );
  const complete = rows.filter(isComplete);
  return {
    rows,
    complete,
    leftOut: {
      withData: rows.length,
      complete: complete.length,
      participants: rows
        .filter((row) => !isComplete(row))
        .map(({ participant, cells }) => ({
          participantId: participant.frame.id,
          missingConditions: conditionKeys.filter((_key, index) => cells[index] === null),
        })),
    },
  };
}

/** The cells of two conditions, of the participants who gave both. */
export function pairedCells(
  rows: readonly ConditionRow[],
  firstIndex: number,
  secondIndex: number,
): { first: number[]; second: number[] } {
  const first: number[] = [];
  const second: number[] = [];
  for (const { cells } of rows) {
    const a = cells[firstIndex] ?? null;
    const b = cells[secondIndex] ?? null;
    if (a === null || b === null) continue;
    first.push(a);
    second.push(b);
  }
  return { first, second };
}

function isComplete(row: ConditionRow): row is CompleteRow {
  return row.cells.every((cell) => cell !== null);
}
