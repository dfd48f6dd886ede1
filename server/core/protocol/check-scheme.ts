import { primePower } from '../numerics/finite-field.ts';
import { customListFaults } from './check-custom-list.ts';
import { incompleteFaults } from './check-incomplete-scheme.ts';
import { constrainedFaults, fractionFaults, randomFaults } from './check-permutation-schemes.ts';
import { conditionBlocks, withinFactorCount } from './condition-blocks.ts';
import type { ProtocolFault } from './fault.ts';
import {
  type BaseScheme,
  type NestedScheme,
  type SchemeChoice,
  SEQUENCES_MAX,
  TWO_CONDITION_DESIGNS,
  type TwoConditionDesign,
} from './protocol.ts';

/** Complete permutations stop here: 7 conditions have 7! = 5040 sequences, 8 have 40,320. */
export const COMPLETE_PERMUTATION_CONDITIONS_MAX = 7;

/**
 * Everything that keeps a scheme from being built for these conditions and periods.
 *
 * - Complete permutations, cyclic Latin square, Williams and orthogonal Latin squares need at least
 *   two conditions and as many periods as conditions; orthogonal squares a prime power of them.
 * - A mirrored scheme has twice as many periods as its base, an extra-period one has one more.
 * - A design for two conditions has the periods that its name spells out.
 * - Balanced incomplete blocks have fewer periods than conditions.
 * - A fraction of the permutations, random orders, orders under constraints and nested schemes have
 *   as many periods as conditions. A nested scheme needs two within factors.
 * - A custom list may have more or fewer periods than conditions. A sequence may stand in it more
 *   than once: every row is handed out as often as every other, so a repeated row is replicated.
 *
 * @param conditionKeys every condition once
 * @param periods       periods.count of the protocol
 * @returns faults with pointers from the protocol's root, none when the scheme can be built
 */
export function schemeFaults(
  scheme: SchemeChoice,
  conditionKeys: readonly string[],
  periods: number,
): ProtocolFault[] {
  const conditionCount = conditionKeys.length;
  switch (scheme.kind) {
    case 'custom-list':
      return customListFaults(scheme.sequences, conditionKeys, periods);
    case 'two-conditions':
      return twoConditionFaults(scheme.design, conditionCount, periods);
    case 'mirrored':
      return [
        ...baseFaults(scheme.base, conditionCount, '/scheme/base'),
        ...periodFaults('a mirrored scheme', 2 * conditionCount, conditionCount, periods),
      ];
    case 'extra-period':
      return [
        ...baseFaults(scheme.base, conditionCount, '/scheme/base'),
        ...periodFaults('an extra-period scheme', conditionCount + 1, conditionCount, periods),
      ];
    case 'balanced-incomplete-blocks':
      return incompleteFaults(scheme.carryoverBalanced, conditionCount, periods);
    case 'permutation-fraction':
      return [
        ...fractionFaults(scheme.squares, conditionCount),
        ...equalPeriodFaults(scheme.kind, conditionCount, periods),
      ];
    case 'random-permutations':
      return [
        ...randomFaults(scheme, conditionCount),
        ...equalPeriodFaults(scheme.kind, conditionCount, periods),
      ];
    case 'constrained-permutations':
      return [
        ...constrainedFaults(scheme.constraints, conditionKeys),
        ...equalPeriodFaults(scheme.kind, conditionCount, periods),
      ];
    case 'nested':
      return [
        ...nestedFaults(scheme, conditionKeys),
        ...equalPeriodFaults(scheme.kind, conditionCount, periods),
      ];
    default:
      return [
        ...baseFaults(scheme.kind, conditionCount, '/scheme'),
        ...equalPeriodFaults(scheme.kind, conditionCount, periods),
      ];
  }
}

/** Faults of a scheme that presents every condition once, apart from the number of periods. */
function baseFaults(base: BaseScheme, conditionCount: number, pointer: string): ProtocolFault[] {
  if (conditionCount < 2) {
    const message = 'A scheme needs two conditions';
    return [{ pointer, code: 'scheme-needs-two-conditions', message }];
  }
  if (base === 'complete-permutations' && conditionCount > COMPLETE_PERMUTATION_CONDITIONS_MAX) {
    const message =
      `Complete permutations are built for at most ${COMPLETE_PERMUTATION_CONDITIONS_MAX} ` +
      `conditions, but there are ${conditionCount}; a Williams square needs far fewer sequences`;
    return [{ pointer, code: 'too-many-conditions-for-scheme', message }];
  }
  if (base === 'orthogonal-latin-squares' && primePower(conditionCount) === null) {
    const message =
      'A complete set of orthogonal Latin squares is known only for a prime power of conditions; ' +
      `${conditionCount} is none, the nearest are ${nearestPrimePowers(conditionCount)}. A ` +
      'Williams design balances immediate succession for any number';
    return [{ pointer, code: 'conditions-not-a-prime-power', message }];
  }
  return [];
}

function nestedFaults(scheme: NestedScheme, conditionKeys: readonly string[]): ProtocolFault[] {
  const factorCount = withinFactorCount(conditionKeys);
  const { blockedFactor } = scheme;
  if (factorCount < 2) {
    const message =
      'A nested scheme needs two within factors, one for the blocks and one inside them; ' +
      'with one factor a Williams design balances its levels';
    return [{ pointer: '/scheme', code: 'scheme-needs-two-factors', message }];
  }
  if (!Number.isInteger(blockedFactor) || blockedFactor < 1 || blockedFactor > factorCount) {
    const message = `The within factors are 1 to ${factorCount}, not ${blockedFactor}`;
    return [{ pointer: '/scheme/blockedFactor', code: 'unknown-factor', message }];
  }
  const groups = conditionBlocks(conditionKeys, blockedFactor);
  const size = groups[0]?.length ?? 0;
  const faults = [
    ...baseFaults(scheme.blocks, groups.length, '/scheme/blocks'),
    ...baseFaults(scheme.insideBlocks, size, '/scheme/insideBlocks'),
  ];
  if (faults.length > 0) return faults;
  const outer = sequenceCount(scheme.blocks, groups.length);
  const inner = sequenceCount(scheme.insideBlocks, size);
  if (outer * inner > SEQUENCES_MAX) {
    const message =
      `${outer} orders of blocks with ${inner} orders inside them are ${outer * inner} ` +
      `sequences, more than ${SEQUENCES_MAX}; a cyclic or Williams square has fewer`;
    faults.push({ pointer: '/scheme', code: 'too-many-sequences', message });
  }
  return faults;
}

/** How many sequences a base has; it must be one that can be built. */
function sequenceCount(base: BaseScheme, conditionCount: number): number {
  switch (base) {
    case 'complete-permutations': {
      let orders = 1;
      for (let factor = 2; factor <= conditionCount; factor += 1) orders *= factor;
      return orders;
    }
    case 'cyclic-latin-square':
      return conditionCount;
    case 'williams':
      return conditionCount % 2 === 0 ? conditionCount : 2 * conditionCount;
    case 'orthogonal-latin-squares':
      return conditionCount * (conditionCount - 1);
  }
}

function equalPeriodFaults(kind: string, conditionCount: number, periods: number): ProtocolFault[] {
  if (periods === conditionCount) return [];
  const message =
    `The scheme ${kind} needs as many periods as conditions, ` +
    `but there are ${periods} periods and ${conditionCount} conditions`;
  return [{ pointer: '/scheme', code: 'scheme-needs-periods-equal-to-conditions', message }];
}

/** @param scheme with its article, as it stands in the message */
function periodFaults(
  scheme: string,
  needed: number,
  conditionCount: number,
  periods: number,
): ProtocolFault[] {
  if (periods === needed) return [];
  const message =
    `With ${conditionCount} conditions ${scheme} has ${needed} periods, ` +
    `but the protocol has ${periods}`;
  return [{ pointer: '/scheme', code: 'scheme-needs-other-periods', message }];
}

function twoConditionFaults(
  design: TwoConditionDesign,
  conditionCount: number,
  periods: number,
): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  if (conditionCount !== 2) {
    const message = `The design ${design} is for two conditions, but there are ${conditionCount}`;
    faults.push({ pointer: '/scheme', code: 'scheme-needs-just-two-conditions', message });
  }
  const needed = periodsOf(design);
  if (periods !== needed) {
    const fitting = TWO_CONDITION_DESIGNS.filter((other) => periodsOf(other) === periods);
    const message =
      `The design ${design} has ${needed} periods, but the protocol has ${periods}; ` +
      (fitting.length > 0
        ? `designs with ${periods}: ${fitting.join(', ')}`
        : 'designs for two conditions have 2, 3 or 4');
    faults.push({ pointer: '/scheme/design', code: 'scheme-needs-other-periods', message });
  }
  return faults;
}

function periodsOf(design: TwoConditionDesign): number {
  return design.indexOf('-');
}

function nearestPrimePowers(value: number): string {
  let below = value - 1;
  while (primePower(below) === null) below -= 1;
  let above = value + 1;
  while (primePower(above) === null) above += 1;
  return `${below} and ${above}`;
}

/** Whether every participant meets every condition under the scheme. */
export function meetsEveryCondition(
  scheme: SchemeChoice,
  conditionKeys: readonly string[],
): boolean {
  switch (scheme.kind) {
    case 'custom-list':
      return scheme.sequences.every((sequence) =>
        conditionKeys.every((key) => sequence.includes(key)),
      );
    case 'two-conditions':
      return scheme.design.split('-').every((row) => row.includes('a') && row.includes('b'));
    case 'balanced-incomplete-blocks':
      return false;
    default:
      return true;
  }
}
