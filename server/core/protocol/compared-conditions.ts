import type { SchemeChoice } from './protocol.ts';

/**
 * The conditions that are compared with each other: all but those that everybody meets first, for
 * familiarisation. Such a condition always stands in period 1, so that it cannot be told apart from
 * that period; it is described, and in no planned comparison.
 *
 * @param conditionKeys in the order of the protocol
 */
export function comparedConditions(
  scheme: SchemeChoice,
  conditionKeys: readonly string[],
): string[] {
  if (scheme.kind !== 'constrained-permutations') return [...conditionKeys];
  const familiarisation = new Set(
    scheme.constraints.flatMap((constraint) =>
      constraint.kind === 'familiarisation-first' ? [constraint.condition] : [],
    ),
  );
  return conditionKeys.filter((key) => !familiarisation.has(key));
}
