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

/** Values closer together than this, by their size, are drawn as one: ticks could not tell them. */
const SPAN_RELATIVE_MIN = 1e-9;
/** Nothing measured is smaller; an axis would need decimals beyond double precision. */
const SPAN_MIN = 1e-15;

/**
 * An axis with ticks at multiples of 1, 2 or 5 times a power of ten, from at or below the smallest
 * value to at or above the largest.
 *
 * @param values at least one, all finite
 */
export function axisFor(values: readonly number[]): Axis {
  const low = values.reduce((a, b) => Math.min(a, b));
  const high = values.reduce((a, b) => Math.max(a, b));
  const size = Math.max(Math.abs(low), Math.abs(high));
  const spread = high > low ? Math.max(high - low, size * SPAN_RELATIVE_MIN) : size;
  const span = spread === 0 ? 1 : Math.max(spread, SPAN_MIN);
  const rough = span / TICKS_AIM;
  const power = Math.floor(Math.log10(rough));
  const lead = rough / 10 ** power;
  const factor = lead <= 1 ? 1 : lead <= 2 ? 2 : lead <= 5 ? 5 : 10;
  const decimals = Math.max(0, -(factor === 10 ? power + 1 : power));
  const step = factor * 10 ** power;
  const first = Math.floor(low / step + 1e-9);
  const last = Math.max(Math.ceil(high / step - 1e-9), first + 1);
  const ticks = Array.from({ length: last - first + 1 }, (_, index) =>
    Number(((first + index) * step).toFixed(decimals)),
  );
  return { ticks, decimals, minimum: ticks[0]!, maximum: ticks[ticks.length - 1]! };
}
