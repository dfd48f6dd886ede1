import { DomainError } from '../errors.ts';

/**
 * The sequences of a custom list as condition indices, in the order of the list. A row that stands
 * in it twice stays twice, and is therefore handed out twice as often.
 *
 * @param sequences     condition keys by period
 * @param conditionKeys the conditions; an index is the place in this array
 * @throws {DomainError} naming a key that is not a condition
 */
export function customList(
  sequences: readonly (readonly string[])[],
  conditionKeys: readonly string[],
): number[][] {
  const indexByKey = new Map(conditionKeys.map((key, index) => [key, index]));
  return sequences.map((sequence) =>
    sequence.map((key) => {
      const index = indexByKey.get(key);
      if (index === undefined) throw new DomainError(`"${key}" is not a condition`);
      return index;
    }),
  );
}
