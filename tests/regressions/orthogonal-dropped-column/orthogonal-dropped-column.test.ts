import { describe, expect, it } from 'vitest';
import { householderQr, linearCombination } from '#core/numerics/householder-qr.ts';
import { matrixFromRows } from '#core/numerics/matrix.ts';

/** Columns: two participants, two periods, direct effects of A and B, carryover of A and B. */
const design = matrixFromRows([
  [1, 0, 1, 0, 1, 0, 0, 0],
  [1, 0, 0, 1, 0, 1, 1, 0],
  [0, 1, 1, 0, 1, 0, 0, 0],
  [0, 1, 0, 1, 1, 0, 1, 0],
]);

describe('a comparison orthogonal to a dropped column', () => {
  it('is determined', () => {
    const qr = householderQr(design);
    // By hand: the participants' differences (second period less first) are π + τ + γ and π + γ;
    // τ is the difference of the two, each with variance 2σ².
    const answer = linearCombination(qr, Float64Array.of(0, 0, 0, 0, 1, -1, 0, 0));
    expect(answer.determined).toBe(true);
    expect(answer.varianceFactor).toBeCloseTo(4, 12);
  });

  it('stays undetermined where nothing tells the two effects apart', () => {
    const qr = householderQr(design);
    const carryover = Float64Array.of(0, 0, 0, 0, 0, 0, 1, -1);
    expect(linearCombination(qr, carryover).determined).toBe(false);
  });
});
