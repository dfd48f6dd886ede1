// What is true in the demo's invented world: the effects behind every simulated value. All data
// made from it are invented; no participant exists.

export interface LinerTruth {
  readonly key: string;
  readonly label: string;
  /** Pegboard time, as a factor on the silk liner's. */
  readonly timeRatio: number;
  /** Natural logarithm of the factor that the period after this liner still feels. */
  readonly carryover: number;
  /** Pegs dropped out of 25, on average, in the first period. */
  readonly pegsDropped: number;
  /** Chance that a part is mis-seated, in the first period. */
  readonly misseated: number;
  /** Latent comfort; thresholds lie at `COMFORT_THRESHOLDS`. */
  readonly comfort: number;
}

export const LINERS: readonly LinerTruth[] = [
  {
    key: 'silk',
    label: 'Silk',
    timeRatio: 1,
    carryover: 0,
    pegsDropped: 1.2,
    misseated: 0.06,
    comfort: -0.6,
  },
  {
    key: 'merino',
    label: 'Merino wool',
    timeRatio: 1.06,
    carryover: 0,
    pegsDropped: 1.5,
    misseated: 0.08,
    comfort: 0.3,
  },
  {
    key: 'fleece',
    label: 'Fleece',
    timeRatio: 1.18,
    carryover: 0.008,
    pegsDropped: 2.6,
    misseated: 0.16,
    comfort: 0.9,
  },
  {
    key: 'mesh',
    label: 'Cotton mesh',
    timeRatio: 0.97,
    carryover: 0,
    pegsDropped: 1.1,
    misseated: 0.05,
    comfort: -1.4,
  },
];

/** Seconds with the silk liner in the first period, for the typical participant. */
export const TYPICAL_SECONDS = 22;

/**
 * Hands cool by more than practice makes up for: each period later multiplies the time by exp of
 * this, adds pegs dropped, adds to the chance of a mis-seated part, and takes from comfort.
 */
export const PER_PERIOD = { logTime: 0.02, pegsDropped: 0.15, misseated: 0.01, comfort: -0.15 };

/** Standard deviations of the logarithm of the time. */
export const SPREAD = { participant: 0.15, period: 0.05, trial: 0.05 };

/** A rating of k + 1 or more begins above the k-th threshold, on the logistic scale. */
export const COMFORT_THRESHOLDS = [-2.6, -1.7, -0.8, 0.1, 1.1, 2.2];

const PERIODS = [0, 1, 2, 3];

/** Mean over the four periods of what a design balanced over periods shows. */
function meanOverPeriods(valueAt: (periodIndex: number) => number): number {
  return PERIODS.reduce((sum, index) => sum + valueAt(index), 0) / PERIODS.length;
}

export function linerOf(key: string): LinerTruth {
  const liner = LINERS.find((one) => one.key === key);
  if (liner === undefined) throw new Error(`There is no liner ${key}.`);
  return liner;
}

/** Chance that a rating is above the threshold, for a latent comfort. */
export function chanceAbove(threshold: number, comfort: number): number {
  return 1 / (1 + Math.exp(threshold - comfort));
}

/** Expected rating, 1 to 7, over the periods. */
export function meanComfort(liner: LinerTruth): number {
  return meanOverPeriods((index) => {
    const comfort = liner.comfort + PER_PERIOD.comfort * index;
    return COMFORT_THRESHOLDS.reduce((sum, t) => sum + chanceAbove(t, comfort), 1);
  });
}

/** Share of mis-seated parts over the periods. */
export function meanMisseated(liner: LinerTruth): number {
  return meanOverPeriods((index) => liner.misseated + PER_PERIOD.misseated * index);
}
