import { isWholeFrom } from '../../protocol/fault.ts';
import { estimabilityFaults, fillingFaults } from './check-estimability.ts';
import type { SearchFault, SearchFaultCode, SearchRequest } from './search-types.ts';
import { keepsRules, sequenceRules } from './sequence-rules.ts';

/** A search of more than these has tables and cycles beyond what a caller would wait for. */
export const SEARCH_LIMITS = {
  conditions: 40,
  periods: 60,
  sequences: 1000,
  constraints: 200,
} as const;

/** Sums of larger weights could leave the range of a double. */
const WEIGHT_MAX = 1e9;

/**
 * Everything that keeps a search from beginning: sizes, weights, limits that name nothing or that
 * contradict each other, too few sequences, and comparisons that no sequences under the limits can
 * make. Each fault says what is wrong and what would work.
 */
export function searchFaults(request: SearchRequest): SearchFault[] {
  const shape = [...sizeFaults(request), ...weightFaults(request), ...limitFaults(request)];
  if (shape.length > 0) return shape;
  const rows = sequenceFaults(request);
  const filling = fillingFaults(request);
  if (rows.length > 0 || filling.length > 0) return [...rows, ...filling];
  return estimabilityFaults(request);
}

function fault(code: SearchFaultCode, message: string, remedy: string): SearchFault {
  return { code, message, remedy };
}

function sizeFaults(request: SearchRequest): SearchFault[] {
  const faults: SearchFault[] = [];
  const { conditions, periods, sequences, constraints } = SEARCH_LIMITS;
  const sizes = [
    ['conditions', request.conditionKeys.length, 2, conditions],
    ['periods', request.periods, 1, periods],
    ['sequences', request.sequenceCount, 1, sequences],
    ['constraints', request.limits.constraints.length, 0, constraints],
  ] as const;
  for (const [noun, count, least, most] of sizes) {
    if (isWholeFrom(least, count) && count <= most) continue;
    const message = `There are ${count} ${noun}`;
    faults.push(fault('size-out-of-range', message, `Give ${least} to ${most} ${noun}`));
  }
  const repeated = request.conditionKeys.find((key, index, keys) => keys.indexOf(key) < index);
  if (repeated !== undefined) {
    const message = `The condition "${repeated}" stands more than once`;
    faults.push(fault('repeated-condition', message, 'Name every condition once'));
  }
  if (!/^[0-9a-f]{16}$/.test(request.seed)) {
    const message = `"${request.seed}" is not a seed`;
    faults.push(fault('malformed-seed', message, 'Give 16 lower-case hexadecimal digits'));
  }
  if (!isWholeFrom(1, request.evaluationsMax)) {
    const message = `The budget is ${request.evaluationsMax} evaluations`;
    faults.push(fault('malformed-budget', message, 'Give a whole number of at least 1'));
  }
  return faults;
}

function weightFaults({ conditionKeys, criterion, limits }: SearchRequest): SearchFault[] {
  const faults: SearchFault[] = [];
  const { direct, carryover, carryoverInModel } = criterion;
  const isIndex = (index: number) => isWholeFrom(0, index) && index < conditionKeys.length;
  const all = [...direct, ...carryover];
  for (const { first, second, weight } of all) {
    if (
      isIndex(first) &&
      isIndex(second) &&
      first !== second &&
      weight >= 0 &&
      weight <= WEIGHT_MAX
    ) {
      continue;
    }
    const message = `A comparison of condition indices ${first} and ${second} weighs ${weight}`;
    const remedy =
      `Give two different indices from 0 to ${conditionKeys.length - 1} ` +
      `and a weight from 0 to ${WEIGHT_MAX}`;
    faults.push(fault('malformed-weight', message, remedy));
  }
  const weighted = all.filter(({ weight }) => weight > 0);
  if (weighted.length === 0) {
    const message = 'No comparison has a weight, so that all designs are equally good';
    faults.push(fault('nothing-to-minimise', message, 'Give at least one comparison a weight'));
  }
  if (carryover.some(({ weight }) => weight > 0) && !carryoverInModel) {
    const message = 'Carryover comparisons have weights, but carryover is not in the model';
    const remedy = 'Put carryover in the model, or weigh direct comparisons only';
    faults.push(fault('carryover-not-in-model', message, remedy));
  }
  const required = limits.constraints.flatMap((constraint) =>
    constraint.kind === 'always-in-periods' || constraint.kind === 'familiarisation-first'
      ? [constraint.condition]
      : [],
  );
  for (const [index, key] of weighted.length === 0 ? [] : conditionKeys.entries()) {
    const counts = weighted.some(({ first, second }) => first === index || second === index);
    if (counts || required.includes(key)) continue;
    const message = `"${key}" is in no comparison that has a weight, so that it would be left out`;
    const remedy = `Leave "${key}" out of the conditions, or give one of its comparisons a weight`;
    faults.push(fault('condition-in-no-comparison', message, remedy));
  }
  return faults;
}

function limitFaults({ conditionKeys, periods, limits }: SearchRequest): SearchFault[] {
  const faults: SearchFault[] = [];
  for (const constraint of limits.constraints) {
    const named =
      'condition' in constraint ? [constraint.condition] : [constraint.first, constraint.second];
    for (const key of named.filter((key) => !conditionKeys.includes(key))) {
      const remedy = `The conditions are ${conditionKeys.join(', ')}`;
      faults.push(fault('unknown-condition', `"${key}" is not a condition`, remedy));
    }
    for (const period of 'periods' in constraint ? constraint.periods : []) {
      if (isWholeFrom(1, period) && period <= periods) continue;
      const message = `A constraint names period ${period}`;
      faults.push(fault('unknown-period', message, `The periods are 1 to ${periods}`));
    }
  }
  const { timesMax } = limits;
  if (timesMax !== undefined && !isWholeFrom(1, timesMax)) {
    const message = `A participant may meet a condition ${timesMax} times at most`;
    faults.push(fault('malformed-times', message, 'Give a whole number of at least 1'));
  }
  return faults;
}

/** Faults of given sequences and of the start. */
function sequenceFaults(request: SearchRequest): SearchFault[] {
  const { conditionKeys, periods, sequenceCount, given = [], start } = request;
  const faults: SearchFault[] = [];
  const last = conditionKeys.length - 1;
  const isIndex = (index: number) => isWholeFrom(0, index) && index <= last;
  for (const [row, sequence] of given.entries()) {
    if (sequence.length <= periods && sequence.every(isIndex)) continue;
    const message = `Given sequence ${row + 1} is too long or names no condition`;
    const remedy = `Give at most ${periods} condition indices from 0 to ${last}`;
    faults.push(fault('malformed-sequence', message, remedy));
  }
  if (start === undefined) return faults;
  if (start.length !== sequenceCount) {
    const message = `The start has ${start.length} sequences`;
    faults.push(fault('malformed-sequence', message, `Give ${sequenceCount}, or none at all`));
  }
  const rules = sequenceRules(request.limits, conditionKeys, periods);
  for (const [row, sequence] of start.entries()) {
    if (sequence.length !== periods || !sequence.every(isIndex)) {
      const message = `Sequence ${row + 1} of the start has another form than those to be found`;
      const remedy = `Give ${periods} condition indices from 0 to ${last}`;
      faults.push(fault('malformed-sequence', message, remedy));
    } else if (!keepsRules(sequence, rules)) {
      const message = `Sequence ${row + 1} of the start does not keep the constraints`;
      const remedy = 'Give one that does, or no start at all';
      faults.push(fault('start-breaks-constraints', message, remedy));
    }
  }
  return faults;
}
