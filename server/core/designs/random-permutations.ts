import { randomStream } from '../numerics/generator.ts';
import type { RandomPermutations } from '../protocol/protocol.ts';

/**
 * Orders of the conditions drawn at random, each independently of the others, so that the same one
 * may come twice. Balance over periods and pairs holds only on average: with few participants a
 * Williams design or a fraction of the permutations is better balanced.
 *
 * Order i is drawn from stream i of the registered seed by Fisher and Yates's shuffle (Knuth, The
 * Art of Computer Programming, 3.4.2, algorithm P), so a longer list begins with the shorter one.
 *
 * @param conditionCount n ≥ 2
 * @returns `count` rows of n condition indices
 * @throws {DomainError} when the seed is not 16 lower-case hexadecimal digits
 */
export function randomPermutations(
  { count, seed }: Pick<RandomPermutations, 'count' | 'seed'>,
  conditionCount: number,
): number[][] {
  return Array.from({ length: count }, (_, index) => {
    const stream = randomStream(seed, index);
    const order = Array.from({ length: conditionCount }, (_, condition) => condition);
    for (let last = conditionCount - 1; last > 0; last -= 1) {
      const other = stream.nextBelow(last + 1);
      const moved = order[last]!;
      order[last] = order[other]!;
      order[other] = moved;
    }
    return order;
  });
}
