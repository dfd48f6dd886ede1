/**
 * Condition indices grouped by the level of one within factor: what nested counterbalancing runs in
 * one block. A condition's key is its level keys in factor order, joined by full stops.
 *
 * @param conditionKeys in protocol order, the last factor varying fastest
 * @param place         of the factor among the within factors, from 1
 * @returns one group a level, in the order of the levels, each in protocol order
 */
export function conditionBlocks(conditionKeys: readonly string[], place: number): number[][] {
  const groups = new Map<string, number[]>();
  for (const [index, key] of conditionKeys.entries()) {
    const level = key.split('.')[place - 1] ?? '';
    const group = groups.get(level) ?? [];
    group.push(index);
    groups.set(level, group);
  }
  return [...groups.values()];
}

/** How many within factors the conditions come from. */
export function withinFactorCount(conditionKeys: readonly string[]): number {
  return conditionKeys[0]?.split('.').length ?? 0;
}
