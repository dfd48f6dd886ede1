import type { TwoConditionDesign } from '../protocol/protocol.ts';

/**
 * The sequences of a design for two conditions, written in its own name: `abb-baa` is ABB and BAA,
 * where A is the first condition of the protocol.
 * Source of the designs: Jones & Kenward, Design and Analysis of Cross-Over Trials, chapter 3;
 * Balaam 1968, Biometrics 24:61–73 (`aa-bb-ab-ba`); Laska, Meisner & Kushner 1983, Biometrics
 * 39:1087–1091, who show `abb-baa` and `aabb-bbaa-abba-baab` to be optimal for three and four
 * periods when carryover is in the model.
 *
 * @returns 2 or 4 rows of 2 to 4 condition indices, 0 for A and 1 for B
 */
export function twoConditionSequences(design: TwoConditionDesign): number[][] {
  return design.split('-').map((row) => Array.from(row, (letter) => (letter === 'a' ? 0 : 1)));
}
