import { DomainError } from '../errors.ts';

/**
 * Nested counterbalancing: each order of the blocks with each row of the inner order. The block in
 * place b takes the row b places further on, so that a participant does not meet the same inner
 * order in every block. Over all rows, each condition stands equally often in each period when the
 * block orders and the inner orders are uniform on their own places.
 * Common practice for factors that are costly to change (blocked presentation); no single source.
 *
 * @param groups      condition indices by block, all of the same size m
 * @param blockOrders rows of block indices 0..groups.length − 1
 * @param innerOrders rows of places 0..m−1
 * @returns blockOrders.length · innerOrders.length rows, block order varying slowest
 * @throws {DomainError} when an order names a block or a place that is not there
 */
export function nested(
  groups: readonly (readonly number[])[],
  blockOrders: readonly (readonly number[])[],
  innerOrders: readonly (readonly number[])[],
): number[][] {
  return blockOrders.flatMap((blockOrder) =>
    innerOrders.map((_, start) =>
      blockOrder.flatMap((block, place) => {
        const inner = innerOrders[(start + place) % innerOrders.length] ?? [];
        return inner.map((member) => {
          const condition = groups[block]?.[member];
          if (condition === undefined) {
            throw new DomainError(`Block ${block} has no condition in place ${member}`);
          }
          return condition;
        });
      }),
    ),
  );
}
