import { describe, expect, it } from 'vitest';
import { finiteField, primePower } from '#core/numerics/finite-field.ts';

/** published: OEIS A000961 without its first term 1, the prime powers up to 64 */
const PRIME_POWERS = [
  2, 3, 4, 5, 7, 8, 9, 11, 13, 16, 17, 19, 23, 25, 27, 29, 31, 32, 37, 41, 43, 47, 49, 53, 59, 61,
  64,
];

describe('prime powers', () => {
  it('are known up to 64', () => {
    const found = Array.from({ length: 65 }, (_, n) => n).filter((n) => primePower(n) !== null);
    expect(found).toEqual(PRIME_POWERS);
    expect(primePower(64)).toEqual({ prime: 2, exponent: 6 });
    expect(primePower(49)).toEqual({ prime: 7, exponent: 2 });
    expect(primePower(2.5)).toBeNull();
  });
});

describe('finite fields', () => {
  it('of order 4 multiply as in the published table', () => {
    // published: Lidl & Niederreiter, Introduction to Finite Fields, chapter 1: in the field of
    // four elements 0, 1, θ, θ + 1, θ² = θ + 1; here θ is 2 and θ + 1 is 3
    const { multiply, add } = finiteField(4);
    expect([multiply(2, 2), multiply(2, 3), multiply(3, 3)]).toEqual([3, 1, 2]);
    expect([add(1, 1), add(1, 2), add(2, 3)]).toEqual([0, 3, 1]);
  });

  it.each(PRIME_POWERS)('of order %i obey the laws of a field', (order) => {
    // published: the axioms of a field, ibid. definition 1.29
    const { add, multiply } = finiteField(order);
    const elements = Array.from({ length: order }, (_, element) => element);
    for (const a of elements) {
      expect(add(a, 0)).toBe(a);
      expect(multiply(a, 1)).toBe(a);
      expect(new Set(elements.map((b) => add(a, b))).size).toBe(order);
      if (a !== 0) expect(new Set(elements.map((b) => multiply(a, b))).size).toBe(order);
    }
    let broken = 0;
    for (const a of elements) {
      for (const b of elements) {
        if (add(a, b) !== add(b, a) || multiply(a, b) !== multiply(b, a)) broken += 1;
        for (const c of elements) {
          if (multiply(a, add(b, c)) !== add(multiply(a, b), multiply(a, c))) broken += 1;
          if (multiply(a, multiply(b, c)) !== multiply(multiply(a, b), c)) broken += 1;
          if (add(a, add(b, c)) !== add(add(a, b), c)) broken += 1;
        }
      }
    }
    expect(broken).toBe(0);
  });

  it('exist for prime powers alone', () => {
    expect(() => finiteField(6)).toThrow(/order 6: it is not a prime power/);
    expect(() => finiteField(1)).toThrow(/not a prime power/);
    expect(() => finiteField(1031)).toThrow(/above 1024/);
  });
});
