import { permittedOrders } from '../protocol/order-constraints.ts';
import { type OrderConstraint, SEQUENCES_MAX } from '../protocol/protocol.ts';

/**
 * Every order of the conditions that meets the constraints, each once, in lexicographic order: the
 * complete permutations without those that are ruled out. What is left is as balanced as the
 * constraints let it be when all of it is handed out equally often, and no more: `designProperties`
 * tells.
 *
 * @param constraints without a fault of `constraintFaults`
 * @returns 1 to 5040 rows, each with every condition once
 */
export function constrainedPermutations(
  constraints: readonly OrderConstraint[],
  conditionKeys: readonly string[],
): number[][] {
  return permittedOrders(constraints, conditionKeys, SEQUENCES_MAX);
}
