/**
 * Each sequence followed by its own mirror image: ABC becomes ABCCBA. Every condition then has the
 * same mean place in each participant, so that a drift that is linear over the periods falls on all
 * alike, without any adjustment. In the middle a condition follows itself.
 * Common practice (counterbalancing within participants); no single source.
 *
 * @param sequences rows of p condition indices
 * @returns as many rows of 2p
 */
export function mirrored(sequences: readonly (readonly number[])[]): number[][] {
  return sequences.map((sequence) => [...sequence, ...sequence.toReversed()]);
}
