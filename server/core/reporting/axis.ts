/** Round numbers along an axis, and the decimals that tell them apart. */
export interface Axis {
  readonly ticks: readonly number[];
  readonly decimals: number;
  /** Ends of the axis: the first and last tick. */
  readonly minimum: number;
  readonly maximum: number;
}

/** Ticks aimed at; the axis has between about half and twice as many. */
const TICKS_AIM = 5;

/**
 * An axis with ticks at multiples of 1, 2 or 5 times a power of ten, from at or below the smallest
 * value to at or above the largest.
 *
 * @param values at least one, all finite
 */
export function axisFor(values: readonly number[]): Axis {
  const low = values.reduce((a, b) => Math.min(a, b));
  const high = values.reduce((a, b) => Math.max(a, b));
  const span = high - low > 0 ? high - low : Math.abs(high) || 1;
  const rough = span / TICKS_AIM;
  const power = Math.floor(Math.log10(rough));
  const lead = rough / 10 ** power;
  const factor = lead <= 1 ? 1 : lead <= 2 ? 2 : lead <= 5 ? 5 : 10;
  const decimals = Math.max(0, -(factor === 10 ? power + 1 : power));
  const step = factor * 10 ** power;
  const first = Math.floor(low / step + 1e-9);
  const last = Math.max(Math.ceil(high / step - 1e-9), first + 1);
  const ticks = Array.from({ length: last - first + 1 }, (_, index) =>
    Number(((first + index) * step).toFixed(Math.min(decimals, 100))),
  );
  return { ticks, decimals, minimum: ticks[0]!, maximum: ticks[ticks.length - 1]! };
}
