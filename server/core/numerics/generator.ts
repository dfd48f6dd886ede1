import { DomainError } from '../errors.ts';

/** Name and version of the generator, stored beside every seed so that draws can be repeated. */
export const GENERATOR = { name: 'philox4x32-10', version: 1 } as const;

/** Multipliers and key increments: Salmon, Moraes, Dror & Shaw 2011, table 2 and §4.3. */
const MULTIPLIER_0 = 0xd2511f53;
const MULTIPLIER_1 = 0xcd9e8d57;
const KEY_STEP_0 = 0x9e3779b9;
const KEY_STEP_1 = 0xbb67ae85;
const ROUNDS = 10;

/**
 * High 32 bits of the 64-bit product of two unsigned 32-bit integers, by 16-bit halves: every
 * intermediate is a whole number below 2⁵³, so the result is exact on any machine.
 */
function highProduct(left: number, right: number): number {
  const leftLow = left & 0xffff;
  const leftHigh = left >>> 16;
  const rightLow = right & 0xffff;
  const rightHigh = right >>> 16;
  const middle = leftHigh * rightLow + ((leftLow * rightLow) >>> 16);
  const carry = leftLow * rightHigh + (middle & 0xffff);
  return (leftHigh * rightHigh + Math.floor(middle / 65536) + Math.floor(carry / 65536)) >>> 0;
}

/**
 * One block of Philox4x32-10: a pure function from a counter of four and a key of two unsigned
 * 32-bit words to four words, by integer arithmetic only.
 *
 * Source: Salmon, Moraes, Dror & Shaw 2011, "Parallel random numbers: as easy as 1, 2, 3" (SC'11).
 */
export function philoxBlock(
  counter: readonly [number, number, number, number],
  key: readonly [number, number],
): [number, number, number, number] {
  let [a, b, c, d] = counter;
  let [keyLow, keyHigh] = key;
  for (let round = 0; round < ROUNDS; round += 1) {
    const high0 = highProduct(MULTIPLIER_0, a);
    const low0 = Math.imul(MULTIPLIER_0, a);
    const high1 = highProduct(MULTIPLIER_1, c);
    const low1 = Math.imul(MULTIPLIER_1, c);
    a = (high1 ^ b ^ keyLow) >>> 0;
    b = low1 >>> 0;
    c = (high0 ^ d ^ keyHigh) >>> 0;
    d = low0 >>> 0;
    keyLow = (keyLow + KEY_STEP_0) >>> 0;
    keyHigh = (keyHigh + KEY_STEP_1) >>> 0;
  }
  return [a, b, c, d];
}

/** Draws in order from one stream of one seed. */
export interface RandomStream {
  /** A whole number, uniform on 0 … 2³² − 1. */
  nextWord(): number;
  /** Uniform on the open interval (0, 1): (k + ½)·2⁻⁵² with 52 random bits k. */
  nextUniform(): number;
  /** A whole number, uniform on 0 … bound − 1, without bias. */
  nextBelow(bound: number): number;
}

/**
 * A stream of draws. Streams of one seed with different numbers never overlap, so each purpose
 * (or each replicate) takes its own and none depends on how many draws another made.
 *
 * @param seed   16 hexadecimal digits, the 64-bit key
 * @param stream whole number, 0 ≤ stream < 2³²
 * @throws {DomainError} when seed or stream has another form
 */
export function randomStream(seed: string, stream: number): RandomStream {
  if (!/^[0-9a-f]{16}$/.test(seed)) {
    throw new DomainError('A seed is 16 lower-case hexadecimal digits.');
  }
  if (!Number.isInteger(stream) || stream < 0 || stream >= 2 ** 32) {
    throw new DomainError(`A stream is a whole number from 0 to 2³² − 1, got ${stream}.`);
  }
  const key = [Number.parseInt(seed.slice(8), 16), Number.parseInt(seed.slice(0, 8), 16)] as const;
  let block: readonly number[] = [];
  let position = 0;
  let used = 4;
  const nextWord = (): number => {
    if (used === 4) {
      block = philoxBlock([position % 2 ** 32, Math.floor(position / 2 ** 32), stream, 0], key);
      position += 1;
      used = 0;
    }
    used += 1;
    return block[used - 1]!;
  };
  const nextUniform = (): number => {
    const high = nextWord() >>> 6;
    const low = nextWord() >>> 6;
    return (high * 2 ** 26 + low + 0.5) * 2 ** -52;
  };
  const nextBelow = (bound: number): number => {
    if (!Number.isInteger(bound) || bound < 1 || bound > 2 ** 32) {
      throw new DomainError(`A bound is a whole number from 1 to 2³², got ${bound}.`);
    }
    // Words from the last, incomplete run of `bound` values are thrown back: they would favour
    // small numbers. Fewer than half of all words are.
    const limit = 2 ** 32 - (2 ** 32 % bound);
    let word = nextWord();
    while (word >= limit) word = nextWord();
    return word % bound;
  };
  return { nextWord, nextUniform, nextBelow };
}
