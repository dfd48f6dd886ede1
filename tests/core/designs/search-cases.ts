import fc from 'fast-check';
import { allPairs } from '#core/designs/search/criterion.ts';
import type {
  SearchOutcome,
  SearchRequest,
  SearchResult,
} from '#core/designs/search/search-types.ts';
import type { OrderConstraint } from '#core/protocol/protocol.ts';

export const SEED = '0123456789abcdef';

/** Condition keys "c0", "c1", … */
export function keysOf(conditionCount: number): string[] {
  return Array.from({ length: conditionCount }, (_, index) => `c${index}`);
}

/** A request for all pairs of direct effects adjusted for carryover, without constraints. */
export function requestFor(
  conditionCount: number,
  periods: number,
  sequenceCount: number,
  changes: Partial<SearchRequest> = {},
): SearchRequest {
  return {
    conditionKeys: keysOf(conditionCount),
    periods,
    sequenceCount,
    limits: { constraints: [] },
    criterion: { carryoverInModel: true, direct: allPairs(conditionCount), carryover: [] },
    seed: SEED,
    evaluationsMax: 20_000,
    ...changes,
  };
}

/** The result; a fault fails the test. */
export function resultOf(outcome: SearchOutcome): SearchResult {
  if (!outcome.found) throw new Error(JSON.stringify(outcome.faults));
  return outcome;
}

/** Whether a sequence keeps a constraint, read from the constraint's words and not from tables. */
export function keeps(sequence: readonly string[], constraint: OrderConstraint): boolean {
  const places = (key: string) =>
    sequence.flatMap((condition, index) => (condition === key ? [index + 1] : []));
  const follows = (first: string, second: string) =>
    sequence.some((key, index) => key === second && sequence[index - 1] === first);
  switch (constraint.kind) {
    case 'never-in-periods':
      return places(constraint.condition).every((place) => !constraint.periods.includes(place));
    case 'always-in-periods': {
      const found = places(constraint.condition);
      return found.length > 0 && found.every((place) => constraint.periods.includes(place));
    }
    case 'familiarisation-first':
      return places(constraint.condition).join() === '1';
    case 'never-adjacent':
      return (
        !follows(constraint.first, constraint.second) &&
        !follows(constraint.second, constraint.first)
      );
    case 'never-in-order':
      return !follows(constraint.first, constraint.second);
  }
}

/** Every sequence of the periods, and every set of so many of them, repetitions included. */
export function everyDesign(conditionCount: number, periods: number, sequenceCount: number) {
  let sequences: number[][] = [[]];
  for (let period = 0; period < periods; period += 1) {
    sequences = sequences.flatMap((sequence) =>
      Array.from({ length: conditionCount }, (_, condition) => [...sequence, condition]),
    );
  }
  const designs: number[][][] = [];
  const extend = (design: number[][], from: number): void => {
    if (design.length === sequenceCount) designs.push(design);
    else {
      for (let next = from; next < sequences.length; next += 1) {
        extend([...design, sequences[next]!], next);
      }
    }
  };
  extend([], 0);
  return designs;
}

/** Requests of up to five conditions and six periods with up to four constraints. */
export const constrainedRequests: fc.Arbitrary<SearchRequest> = fc
  .record({
    conditionCount: fc.integer({ min: 2, max: 5 }),
    periods: fc.integer({ min: 2, max: 6 }),
  })
  .chain(({ conditionCount, periods }) => {
    const key = fc.constantFrom(...keysOf(conditionCount));
    const numbers = fc.uniqueArray(fc.integer({ min: 1, max: periods }), {
      minLength: 1,
      maxLength: 3,
    });
    const constraint: fc.Arbitrary<OrderConstraint> = fc.oneof(
      fc.record({
        kind: fc.constantFrom('never-in-periods' as const, 'always-in-periods' as const),
        condition: key,
        periods: numbers,
      }),
      fc.record({
        kind: fc.constantFrom('never-adjacent' as const, 'never-in-order' as const),
        first: key,
        second: key,
      }),
      fc.record({ kind: fc.constant('familiarisation-first' as const), condition: key }),
    );
    return fc
      .record({
        sequenceCount: fc.integer({ min: 3, max: 9 }),
        constraints: fc.array(constraint, { maxLength: 4 }),
        timesMax: fc.option(fc.integer({ min: 1, max: 3 })),
        carryoverInModel: fc.boolean(),
        seed: fc.bigInt({ min: 0n, max: 2n ** 64n - 1n }),
      })
      .map(({ sequenceCount, constraints, timesMax, carryoverInModel, seed }) =>
        requestFor(conditionCount, periods, sequenceCount, {
          limits: timesMax === null ? { constraints } : { constraints, timesMax },
          criterion: { carryoverInModel, direct: allPairs(conditionCount), carryover: [] },
          seed: seed.toString(16).padStart(16, '0'),
          evaluationsMax: 3000,
        }),
      );
  });
