import type { AllocationPlan } from '#core/allocation/ledger.ts';
import type { SimulatedEnrolment } from '#core/allocation/predictability.ts';
import type { PolicyChoice } from '#core/protocol/protocol.ts';

/** What an estimate takes, so that what would take too much can be refused before it begins. */
export interface EstimateWork {
  /** Looks at one sequence, roughly. */
  readonly steps: number;
  /** Numbers held at a time by the studies that the guesser imagines. */
  readonly held: number;
}

/**
 * Over studies of 2 to 5040 sequences, 1 to 256 strata and 2 to 50 sites a step was measured to
 * take 0.04 to 0.63 microseconds on one core: a quarter of a minute at most on such a one.
 */
export const STEPS_MAX = 20_000_000;

/** With 9 million numbers held, the process was measured to take 490 MB; with 0.1 million, 160. */
export const HELD_MAX = 5_000_000;

/** An array or a map's entry takes as much room and time as so many numbers in it. */
const PER_ARRAY = 64;

/** Copying so many numbers takes about as long as one step. */
const COPIED_PER_STEP = 128;

/**
 * The work of `predictability` for several plans, as it grows with what is asked for. Every slot of
 * every simulated study is looked at by each study that the guesser imagines, in each of its two
 * views with hidden slots; and after every slot seen, all that is imagined may have to be copied.
 */
export function predictabilityWork(
  plans: readonly AllocationPlan[],
  enrolment: Omit<SimulatedEnrolment, 'seed'>,
): EstimateWork {
  const { sites, participantsPerSite, studies, imagined, strata } = enrolment;
  const slots = sites * participantsPerSite;
  let steps = 0;
  let held = 0;
  for (const { set, policy } of plans) {
    const sequences = set.sequences.length;
    const periods = set.sequences[0]?.length ?? 0;
    const tally = sequences + set.conditionCount * (periods + set.conditionCount) + 3 * PER_ARRAY;
    const cells = Math.min(slots, sites * strata.length) * (sequences + PER_ARRAY);
    const size = cells + (sites + Math.min(slots, strata.length) + 1) * tally;
    const looks = slots * studies * (2 * imagined + 1) * sequences;
    const copied = 2 * participantsPerSite * studies * imagined * size;
    steps += looks * stepsOf(policy, strata.length) + copied / COPIED_PER_STEP;
    held = Math.max(held, 2 * imagined * size);
  }
  return { steps: Math.round(steps), held };
}

/** How often a policy goes over the sequences for one slot, compared with *balanced*. */
function stepsOf(policy: PolicyChoice, strataCount: number): number {
  switch (policy.kind) {
    case 'balanced':
      return 1;
    case 'permuted-blocks':
      return policy.multiples.length;
    case 'minimisation':
      return strataCount;
  }
}
