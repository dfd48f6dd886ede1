import { normalSurvivalQuantile } from '../distributions/normal.ts';
import { DomainError } from '../errors.ts';
import type { ConfidenceInterval } from '../estimability.ts';

/**
 * Score interval of a proportion, without continuity correction. It supposes independent trials;
 * repeated trials of one participant make it too narrow. Source: Wilson 1927, Journal of the
 * American Statistical Association 22:209.
 *
 * @param successes whole, 0 to trials
 * @param trials    whole, at least 1
 * @param level     confidence level in (0, 1)
 * @throws {DomainError} outside these ranges
 */
export function wilsonInterval(
  successes: number,
  trials: number,
  level: number,
): ConfidenceInterval {
  const isCount = Number.isInteger(successes) && Number.isInteger(trials);
  if (!isCount || trials < 1 || successes < 0 || successes > trials) {
    throw new DomainError(`${successes} of ${trials} is not a proportion of whole trials`);
  }
  if (!(level > 0 && level < 1)) {
    throw new DomainError(`A confidence level lies between 0 and 1, not at ${level}`);
  }
  const z = normalSurvivalQuantile((1 - level) / 2);
  const failures = trials - successes;
  const centre = successes + (z * z) / 2;
  const spread = z * Math.sqrt((successes * failures) / trials + (z * z) / 4);
  const total = trials + z * z;
  return {
    level,
    // At none and at all the ends are exactly 0 and 1; the formula would round beside them.
    lower: successes === 0 ? 0 : (centre - spread) / total,
    upper: failures === 0 ? 1 : (centre + spread) / total,
  };
}
