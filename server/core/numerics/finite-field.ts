import { DomainError } from '../errors.ts';

/** Fields are built up to this order: their tables hold order² entries. */
const ORDER_MAX = 1024;

/** A finite field on the whole numbers 0..order−1; 0 is zero and 1 is one. */
export interface FiniteField {
  readonly order: number;
  add(left: number, right: number): number;
  multiply(left: number, right: number): number;
}

/**
 * A whole number as a power of one prime, or null when it is none.
 *
 * @param value whole number
 */
export function primePower(value: number): { prime: number; exponent: number } | null {
  if (!Number.isSafeInteger(value) || value < 2) return null;
  let prime = 2;
  while (prime * prime <= value && value % prime !== 0) prime += 1;
  if (value % prime !== 0) prime = value;
  let exponent = 0;
  let rest = value;
  while (rest % prime === 0) {
    rest /= prime;
    exponent += 1;
  }
  return rest === 1 ? { prime, exponent } : null;
}

/**
 * The finite field of an order. An element stands for the polynomial whose coefficients are its
 * digits in base p, lowest first; the modulus is the smallest monic irreducible polynomial of the
 * degree, so that the same order always gives the same field.
 * Source: Lidl & Niederreiter, Introduction to Finite Fields, chapters 2 and 3.
 *
 * @param order a prime power pᵐ, at most 1024
 * @throws {DomainError} when there is no field of that order, or it is too large
 */
export function finiteField(order: number): FiniteField {
  const power = primePower(order);
  if (power === null) {
    throw new DomainError(`There is no finite field of order ${order}: it is not a prime power`);
  }
  if (order > ORDER_MAX) throw new DomainError(`The order ${order} is above ${ORDER_MAX}`);
  const { prime, exponent } = power;
  const modulus = irreducible(prime, exponent);
  const elements = Array.from({ length: order }, (_, value) => digits(value, prime));
  const sums = new Uint16Array(order * order);
  const products = new Uint16Array(order * order);
  for (const [left, first] of elements.entries()) {
    for (const [right, second] of elements.entries()) {
      const sum = Array.from(
        { length: exponent },
        (_, place) => ((first[place] ?? 0) + (second[place] ?? 0)) % prime,
      );
      sums[left * order + right] = value(sum, prime);
      const product = remainder(productOf(first, second, prime), modulus, prime);
      products[left * order + right] = value(product, prime);
    }
  }
  return {
    order,
    add: (left, right) => sums[left * order + right]!,
    multiply: (left, right) => products[left * order + right]!,
  };
}

/** Digits of a whole number in a base, lowest first, without leading zeros. */
function digits(number: number, base: number): number[] {
  const result: number[] = [];
  for (let rest = number; rest > 0; rest = Math.floor(rest / base)) result.push(rest % base);
  return result;
}

function value(polynomial: readonly number[], base: number): number {
  return polynomial.reduceRight((sum, digit) => sum * base + digit, 0);
}

function productOf(left: readonly number[], right: readonly number[], prime: number): number[] {
  const result = new Array<number>(left.length + right.length).fill(0);
  for (const [i, a] of left.entries()) {
    for (const [j, b] of right.entries()) result[i + j] = (result[i + j]! + a * b) % prime;
  }
  return result;
}

/** What division by a monic polynomial leaves, modulo the prime. */
function remainder(dividend: readonly number[], divisor: readonly number[], prime: number) {
  const rest = [...dividend];
  const degree = divisor.length - 1;
  for (let place = rest.length - 1; place >= degree; place -= 1) {
    const factor = rest[place]!;
    for (const [offset, coefficient] of divisor.entries()) {
      const target = place - degree + offset;
      rest[target] = (rest[target]! + (prime - coefficient) * factor) % prime;
    }
  }
  return rest.slice(0, degree);
}

/** The smallest monic polynomial of the degree that no monic one of degree 1 to half divides. */
function irreducible(prime: number, degree: number): number[] {
  const monic = (ofDegree: number): number[][] =>
    Array.from({ length: prime ** ofDegree }, (_, rest) => {
      const polynomial = digits(rest, prime);
      while (polynomial.length < ofDegree) polynomial.push(0);
      return [...polynomial, 1];
    });
  const divisors = Array.from({ length: Math.floor(degree / 2) }, (_, i) => monic(i + 1)).flat();
  const found = monic(degree).find((candidate) =>
    divisors.every((divisor) => remainder(candidate, divisor, prime).some((left) => left !== 0)),
  );
  if (found === undefined) throw new DomainError(`No irreducible polynomial of degree ${degree}`);
  return found;
}
