import {
  type BaseScheme,
  conditionsOf,
  type OrderConstraint,
  type Protocol,
} from '../protocol/protocol.ts';
import { countText } from './number-text.ts';

const BASES: { readonly [Kind in BaseScheme]: string } = {
  'complete-permutations': 'complete permutations',
  'cyclic-latin-square': 'cyclic Latin square',
  williams: 'Williams design',
  'orthogonal-latin-squares': 'complete set of orthogonal Latin squares',
};

/** The scheme that the sequences came from, in words, with all that fixes it but a custom list. */
export function schemeText({ scheme, withinFactors }: Protocol): string {
  switch (scheme.kind) {
    case 'mirrored':
      return `${BASES[scheme.base]}, each sequence followed by its mirror image`;
    case 'extra-period':
      return `${BASES[scheme.base]}, the last condition repeated in an extra period`;
    case 'two-conditions': {
      const [first, second] = conditionsOf(withinFactors);
      const sequences = scheme.design.toUpperCase().split('-').join(', ');
      return `${sequences}, where A is ${first?.label ?? ''} and B is ${second?.label ?? ''}`;
    }
    case 'balanced-incomplete-blocks':
      return scheme.carryoverBalanced
        ? 'balanced incomplete blocks, balanced for carryover'
        : 'balanced incomplete blocks';
    case 'permutation-fraction': {
      const isEven = conditionsOf(withinFactors).length % 2 === 0;
      const squares = countText(scheme.squares, isEven ? 'Williams square' : 'Williams design');
      return `balanced fraction of the complete permutations: ${squares}`;
    }
    case 'random-permutations': {
      const { count, seed, generator } = scheme;
      return (
        `${countText(count, 'order')} drawn at random, each independently ` +
        `(seed ${seed}, ${generator.name} version ${generator.version})`
      );
    }
    case 'constrained-permutations': {
      const rules = constraintTexts(scheme.constraints, withinFactors);
      return `every order of the conditions${rules === '' ? '' : ` in which ${rules}`}`;
    }
    case 'nested': {
      const factor = withinFactors[scheme.blockedFactor - 1];
      return (
        `levels of ${factor?.label ?? ''} in blocks, in the order of a ${BASES[scheme.blocks]}; ` +
        `inside them the other conditions in that of a ${BASES[scheme.insideBlocks]}`
      );
    }
    case 'custom-list':
      return 'a list of sequences given in the protocol';
    default:
      return BASES[scheme.kind];
  }
}

function constraintTexts(
  constraints: readonly OrderConstraint[],
  withinFactors: Protocol['withinFactors'],
): string {
  const labels = new Map(conditionsOf(withinFactors).map(({ key, label }) => [key, label]));
  const labelOf = (key: string) => labels.get(key) ?? key;
  return constraints.map((constraint) => constraintText(constraint, labelOf)).join('; ');
}

function constraintText(constraint: OrderConstraint, labelOf: (key: string) => string): string {
  switch (constraint.kind) {
    case 'never-in-periods':
      return `${labelOf(constraint.condition)} is not in ${periodsText(constraint.periods)}`;
    case 'always-in-periods':
      return `${labelOf(constraint.condition)} is in ${periodsText(constraint.periods)}`;
    case 'never-adjacent':
      return `${labelOf(constraint.first)} and ${labelOf(constraint.second)} are not adjacent`;
    case 'never-in-order': {
      const { first, second } = constraint;
      return `${labelOf(second)} does not come immediately after ${labelOf(first)}`;
    }
    case 'familiarisation-first':
      return `${labelOf(constraint.condition)} is first, for familiarisation, and not compared`;
  }
}

function periodsText(periods: readonly number[]): string {
  return `period ${periods.toSorted((a, b) => a - b).join(' or ')}`;
}
