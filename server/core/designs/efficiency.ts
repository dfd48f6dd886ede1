import { type Estimable, notEstimable } from '../estimability.ts';
import { householderQr, type QrFactorisation } from '../numerics/householder-qr.ts';
import { type DesignInformation, designInformation, differenceVariance } from './information.ts';

/** A difference between two conditions' effects, with the variance of its estimate. */
export interface DesignContrast {
  /** Condition indices, first < second. */
  readonly first: number;
  readonly second: number;
  /** In units of the error variance σ². */
  readonly variance: Estimable<{ readonly value: number }>;
}

/** What a design tells about one kind of effect. */
export interface EffectEfficiency {
  /** Every pair of conditions once, in order. */
  readonly contrasts: readonly DesignContrast[];
  /**
   * Average variance of the pairs in an ideal layout over that in the design; at most 1 for direct
   * effects. Not estimable when some pair is not.
   */
  readonly efficiency: Estimable<{ readonly value: number }>;
}

export interface DesignEfficiency {
  /** Direct effects, without carryover in the model. */
  readonly direct: EffectEfficiency;
  /** Direct effects adjusted for first-order carryover. */
  readonly directAdjusted: EffectEfficiency;
  /** First-order carryover effects, adjusted for direct effects. */
  readonly carryover: EffectEfficiency;
}

/**
 * Efficiencies of a set of sequences in the model with participants and periods fixed.
 *
 * The ideal is an orthogonal layout in which each condition has as many observations as here: the
 * difference of conditions i and j has variance 1/rᵢ + 1/rⱼ there, 2/r when all have r. The direct
 * replication serves for carryover effects too.
 * Source: Jones & Kenward, Design and Analysis of Cross-Over Trials, §4.2 and its tables of
 * efficiencies.
 *
 * @param sequences      rows of condition indices; a row that ends early is a participant who
 *   withdrew
 * @param conditionCount t ≥ 2, including conditions that no sequence presents
 * @throws {DomainError} when no sequence has a period or an index is out of range
 */
export function designEfficiency(
  sequences: readonly (readonly number[])[],
  conditionCount: number,
): DesignEfficiency {
  return efficiencyOf(designInformation(sequences, conditionCount));
}

/** The part of {@link designEfficiency} without carryover in the model, much cheaper. */
export function directEfficiency(
  sequences: readonly (readonly number[])[],
  conditionCount: number,
): EffectEfficiency {
  const { direct, replication } = designInformation(sequences, conditionCount);
  return effectEfficiency(householderQr(direct), 0, replication);
}

/** {@link designEfficiency} from information that is already there. */
export function efficiencyOf(information: DesignInformation): DesignEfficiency {
  const { direct, withCarryover, conditionCount, replication } = information;
  const adjusted = householderQr(withCarryover);
  return {
    direct: effectEfficiency(householderQr(direct), 0, replication),
    directAdjusted: effectEfficiency(adjusted, 0, replication),
    carryover: effectEfficiency(adjusted, conditionCount, replication),
  };
}

/**
 * @param qr          of an information matrix
 * @param firstColumn of the effects in it: 0, or t for carryover
 */
function effectEfficiency(
  qr: QrFactorisation,
  firstColumn: number,
  replication: Float64Array,
): EffectEfficiency {
  const contrasts: DesignContrast[] = [];
  let total = 0;
  let ideal = 0;
  let missing = 0;
  for (let first = 0; first < replication.length; first += 1) {
    for (let second = first + 1; second < replication.length; second += 1) {
      const value = differenceVariance(qr, firstColumn + first, firstColumn + second);
      if (value === null) {
        missing += 1;
        const detail = 'The sequences do not tell these two conditions apart.';
        contrasts.push({ first, second, variance: notEstimable('disconnected', detail) });
      } else {
        total += value;
        ideal += 1 / replication[first]! + 1 / replication[second]!;
        contrasts.push({ first, second, variance: { estimable: true, value } });
      }
    }
  }
  if (contrasts.length === 0) {
    const detail = 'A comparison needs two conditions.';
    return { contrasts, efficiency: notEstimable('too-few-conditions', detail) };
  }
  if (missing > 0) {
    const detail = `${missing} of ${contrasts.length} comparisons cannot be estimated.`;
    return { contrasts, efficiency: notEstimable('disconnected', detail) };
  }
  return { contrasts, efficiency: { estimable: true, value: ideal / total } };
}
