import { DomainError } from '../errors.ts';

/**
 * Sample quantile by linear interpolation between order statistics: with h = (n − 1)·p, the value
 * at ⌊h⌋ plus the fraction of h towards the next. Source: definition 7 of Hyndman & Fan 1996,
 * American Statistician 50:361.
 *
 * @param sorted      ascending, at least one value, all finite
 * @param probability p in [0, 1]
 * @throws {DomainError} when there is no value or the probability lies outside
 */
export function quantile(sorted: ArrayLike<number>, probability: number): number {
  if (sorted.length === 0) throw new DomainError('No value has no quantile');
  if (!(probability >= 0 && probability <= 1)) {
    throw new DomainError(`A probability lies between 0 and 1, not at ${probability}`);
  }
  const place = (sorted.length - 1) * probability;
  const below = Math.floor(place);
  const lower = sorted[below]!;
  const upper = sorted[Math.min(below + 1, sorted.length - 1)]!;
  return lower + (place - below) * (upper - lower);
}

/** The median: {@link quantile} at one half, of values in any order. */
export function median(values: ArrayLike<number>): number {
  return quantile(Float64Array.from(values).sort(), 0.5);
}
