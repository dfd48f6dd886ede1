import type { RandomStream } from '../../numerics/generator.ts';

/**
 * An exponential draw with mean 1 by comparing uniform draws, without a logarithm, whose last digit
 * differs between machines: the same stream gives the same draw everywhere.
 *
 * A run of uniform draws is followed while it falls. Where it breaks after an odd number of draws,
 * the first one is the fraction of the answer; else the whole part grows by one and another begins.
 * Source: von Neumann 1951, "Various techniques used in connection with random digits", National
 * Bureau of Standards Applied Mathematics Series 12:36–38.
 */
export function exponentialDraw(stream: RandomStream): number {
  for (let whole = 0; ; whole += 1) {
    const first = stream.nextUniform();
    let before = first;
    let length = 1;
    for (;;) {
      const next = stream.nextUniform();
      if (next > before) break;
      before = next;
      length += 1;
    }
    if (length % 2 === 1) return whole + first;
  }
}
