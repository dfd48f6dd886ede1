/**
 * Each sequence with its last condition once more. From a set that is uniform on periods and
 * balanced for carryover this makes a strongly balanced one: every condition follows every other
 * and itself equally often, so that direct and carryover effects are orthogonal.
 * Source: Lucas 1957, Journal of Dairy Science 40:225–239; Patterson & Lucas 1959, Biometrics
 * 15:116–132.
 *
 * @param sequences rows of p ≥ 1 condition indices
 * @returns as many rows of p + 1
 */
export function withExtraPeriod(sequences: readonly (readonly number[])[]): number[][] {
  return sequences.map((sequence) => [...sequence, ...sequence.slice(-1)]);
}
