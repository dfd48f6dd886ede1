import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { DomainError } from '#core/errors.ts';
import { philoxBlock, randomStream } from '#core/numerics/generator.ts';

describe('Philox4x32-10', () => {
  // published: Random123 (Salmon, Moraes, Dror & Shaw 2011), tests/kat_vectors, "philox4x32 10".
  test.each([
    [
      [0, 0, 0, 0],
      [0, 0],
      [0x6627e8d5, 0xe169c58d, 0xbc57ac4c, 0x9b00dbd8],
    ],
    [
      [0xffffffff, 0xffffffff, 0xffffffff, 0xffffffff],
      [0xffffffff, 0xffffffff],
      [0x408f276d, 0x41c83b0e, 0xa20bc7c6, 0x6d5451fd],
    ],
    [
      [0x243f6a88, 0x85a308d3, 0x13198a2e, 0x03707344],
      [0xa4093822, 0x299f31d0],
      [0xd16cfe09, 0x94fdcceb, 0x5001e420, 0x24126ea1],
    ],
  ] as const)('known answer of counter %j, key %j', (counter, key, expected) => {
    expect(philoxBlock(counter, key)).toEqual(expected);
  });

  test('a stream is the blocks of its counter in order', () => {
    const stream = randomStream('299f31d0a4093822', 7);
    const words = Array.from({ length: 8 }, () => stream.nextWord());
    const key = [0xa4093822, 0x299f31d0] as const;
    expect(words).toEqual([...philoxBlock([0, 0, 7, 0], key), ...philoxBlock([1, 0, 7, 0], key)]);
  });
});

describe('draws', () => {
  test('uniforms are inside (0, 1), integers below their bound, both even', () => {
    const stream = randomStream('00000000000000ff', 0);
    const counts = new Array<number>(7).fill(0);
    let sum = 0;
    for (let draw = 0; draw < 70_000; draw += 1) {
      const uniform = stream.nextUniform();
      expect(uniform > 0 && uniform < 1).toBe(true);
      sum += uniform;
      counts[stream.nextBelow(7)]! += 1;
    }
    // Five standard errors each: fails for less than one seed in a million.
    expect(Math.abs(sum / 70_000 - 0.5)).toBeLessThan(5 * Math.sqrt(1 / 12 / 70_000));
    for (const count of counts) {
      expect(Math.abs(count - 10_000)).toBeLessThan(5 * Math.sqrt(70_000 * (1 / 7) * (6 / 7)));
    }
  });

  test('equal seed and stream give equal draws; another stream gives others', () => {
    const word = fc.stringMatching(/^[0-9a-f]{16}$/);
    fc.assert(
      fc.property(word, fc.nat(), (seed, number) => {
        const first = randomStream(seed, number);
        const again = randomStream(seed, number);
        const other = randomStream(seed, number + 1);
        const draws = Array.from({ length: 6 }, () => first.nextWord());
        expect(Array.from({ length: 6 }, () => again.nextWord())).toEqual(draws);
        expect(Array.from({ length: 6 }, () => other.nextWord())).not.toEqual(draws);
      }),
    );
  });

  test('seeds, streams and bounds of another form are refused', () => {
    expect(() => randomStream('12', 0)).toThrow(DomainError);
    expect(() => randomStream('0000000000000000', -1)).toThrow(DomainError);
    expect(() => randomStream('0000000000000000', 0).nextBelow(0)).toThrow(DomainError);
    expect(() => randomStream('0000000000000000', 0).nextBelow(1.5)).toThrow(DomainError);
  });
});
