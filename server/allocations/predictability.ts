import { randomBytes } from 'node:crypto';
import type { AllocationPlan } from '#core/allocation/ledger.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { conditionKeysOf, factorFaults } from '#core/protocol/check-factors.ts';
import { policyFaults } from '#core/protocol/check-policy.ts';
import { schemeFaults } from '#core/protocol/check-scheme.ts';
import type { PolicyChoice } from '#core/protocol/protocol.ts';
import { strataOf } from '#core/protocol/strata.ts';
import { type Fault, ProblemError } from '#platform/problems.ts';
import { type EstimateOutput, estimateInThread } from './predictability-in-thread.ts';
import type { PredictabilityBody, PredictabilityResponse } from './predictability-schemas.ts';

/**
 * The most that one estimate may cost, in steps: for each policy slots × simulated studies ×
 * studies the guesser imagines (once for each of its two views with hidden slots) × sequences,
 * times the multiples under permuted blocks and the strata under minimisation. With 2 to 120
 * sequences, 2 to 16 strata and 1 to 10 multiples a step was measured to take 0.03 to 0.9
 * microseconds on one core, so that an estimate takes some twenty seconds at most on such a one.
 */
const WORK_MAX = 20_000_000;

/** Estimates that may wait while one is made; more are refused. */
const WAITING_MAX = 8;

/**
 * Makes one estimate after the other, each in a thread of its own, so that leads who ask for many
 * take one processor core and no more, and arrivals never wait for them.
 */
export function createPredictabilityEstimator() {
  let waiting = 0;
  let last: Promise<unknown> = Promise.resolve();

  /**
   * How often the next sequence can be guessed under each policy, before anything is registered.
   *
   * @throws {ProblemError} `protocol-not-registrable` with every fault of factors, scheme and
   *   policies; `invalid-request` for fewer participants than stations at a site, or more work than
   *   WORK_MAX; `too-many-requests` when too many estimates wait already
   */
  return async function estimatePredictability(
    body: PredictabilityBody,
  ): Promise<PredictabilityResponse> {
    const { plans, strata } = plansOf(body);
    requireFeasible(body, plans, strata.length);
    if (waiting >= WAITING_MAX) {
      throw new ProblemError('too-many-requests', 'Other estimates are being made: try later.');
    }
    const { sites, stationsPerSite, participantsPerSite, studies, imagined } = body;
    const seed = body.seed ?? randomBytes(8).toString('hex');
    const size = { sites, stationsPerSite, participantsPerSite, studies, imagined };
    waiting += 1;
    const made = last
      .then(() => estimateInThread({ plans, enrolment: { ...size, strata, seed } }))
      .finally(() => {
        waiting -= 1;
      });
    last = made.catch(() => undefined);
    return responseOf(body, seed, await made);
  };
}

/** @throws {ProblemError} `protocol-not-registrable` */
function plansOf(body: PredictabilityBody): { plans: AllocationPlan[]; strata: string[] } {
  const { withinFactors, betweenFactors, scheme, periods, policies } = body;
  const keys = conditionKeysOf(withinFactors);
  const faults = factorFaults({ withinFactors, betweenFactors });
  if (keys !== null) faults.push(...schemeFaults(scheme, keys, periods));
  for (const [index, policy] of policies.entries()) {
    for (const fault of policyFaults(policy, betweenFactors)) {
      const pointer = fault.pointer.replace('/policy', `/policies/${index}`);
      faults.push({ ...fault, pointer });
    }
  }
  if (faults.length > 0 || keys === null) {
    const detail = 'Nothing could be handed out like this.';
    throw new ProblemError('protocol-not-registrable', detail, { faults });
  }
  const set = { sequences: sequencesOf(scheme, keys, periods), conditionCount: keys.length };
  const factorKeys = betweenFactors.map(({ key }) => key);
  const plans = policies.map((policy) => ({ set, policy, factorKeys }));
  return { plans, strata: strataOf(betweenFactors) };
}

/** @throws {ProblemError} `invalid-request` */
function requireFeasible(
  body: PredictabilityBody,
  plans: readonly AllocationPlan[],
  strataCount: number,
): void {
  const { sites, stationsPerSite, participantsPerSite, studies, imagined } = body;
  const sequences = plans[0]?.set.sequences.length ?? 0;
  const each = sites * participantsPerSite * studies * (2 * imagined + 1) * sequences;
  const work = each * plans.reduce((sum, { policy }) => sum + stepsOf(policy, strataCount), 0);
  const faults: Fault[] = [];
  if (participantsPerSite < stationsPerSite) {
    faults.push({
      pointer: '/participantsPerSite',
      code: 'fewer-participants-than-stations',
      message: `Must be at least ${stationsPerSite}, one for each station.`,
    });
  }
  if (work > WORK_MAX) {
    faults.push({
      pointer: '/studies',
      code: 'too-much-work',
      message:
        `The simulation would take ${work} steps, more than ${WORK_MAX}. They grow with the ` +
        `${sequences} sequences and with sites, participants, studies, imagined and policies, ` +
        'with the multiples of permuted blocks and the strata of minimisation.',
    });
  }
  if (faults.length === 0) return;
  throw new ProblemError('invalid-request', 'This cannot be estimated.', { faults });
}

/** How much one look at a slot costs under a policy, beside *balanced*. */
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

function responseOf(
  body: PredictabilityBody,
  seed: string,
  estimates: EstimateOutput,
): PredictabilityResponse {
  const chance = estimates[0]?.chance ?? 1;
  return {
    seed,
    sequences: Math.round(1 / chance),
    chance,
    policies: estimates.flatMap(({ station, site, study }, index) => {
      const policy = body.policies[index];
      return policy === undefined ? [] : [{ policy, station, site, study }];
    }),
  };
}
