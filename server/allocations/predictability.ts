import { randomBytes } from 'node:crypto';
import type { AllocationPlan } from '#core/allocation/ledger.ts';
import type { SimulatedEnrolment } from '#core/allocation/predictability.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { conditionKeysOf, factorFaults } from '#core/protocol/check-factors.ts';
import { policyFaults } from '#core/protocol/check-policy.ts';
import { schemeFaults } from '#core/protocol/check-scheme.ts';
import { strataOf } from '#core/protocol/strata.ts';
import { type Fault, ProblemError } from '#platform/problems.ts';
import { type EstimateOutput, estimateInThread } from './predictability-in-thread.ts';
import type { PredictabilityBody, PredictabilityResponse } from './predictability-schemas.ts';
import { HELD_MAX, predictabilityWork, STEPS_MAX } from './predictability-work.ts';

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
   *   policies; `invalid-request` for fewer participants than stations at a site, or more work
   *   than STEPS_MAX and HELD_MAX allow; `too-many-requests` when too many estimates wait already
   */
  return async function estimatePredictability(
    body: PredictabilityBody,
  ): Promise<PredictabilityResponse> {
    const { plans, strata } = plansOf(body);
    const { sites, stationsPerSite, participantsPerSite, studies, imagined } = body;
    const enrolment = { sites, stationsPerSite, participantsPerSite, studies, imagined, strata };
    requireFeasible(plans, enrolment);
    if (waiting >= WAITING_MAX) {
      throw new ProblemError('too-many-requests', 'Other estimates are being made: try later.');
    }
    const seed = body.seed ?? randomBytes(8).toString('hex');
    waiting += 1;
    const made = last
      .then(() => estimateInThread({ plans, enrolment: { ...enrolment, seed } }))
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
  plans: readonly AllocationPlan[],
  enrolment: Omit<SimulatedEnrolment, 'seed'>,
): void {
  const { stationsPerSite, participantsPerSite } = enrolment;
  const { steps, held } = predictabilityWork(plans, enrolment);
  const faults: Fault[] = [];
  if (participantsPerSite < stationsPerSite) {
    faults.push({
      pointer: '/participantsPerSite',
      code: 'fewer-participants-than-stations',
      message: `Must be at least ${stationsPerSite}, one for each station.`,
    });
  }
  if (steps > STEPS_MAX) {
    faults.push({
      pointer: '/studies',
      code: 'too-much-work',
      message:
        `The simulation would take ${steps} steps, more than ${STEPS_MAX}. Fewer studies, ` +
        'imagined, sites, participants, sequences or policies take less.',
    });
  }
  if (held > HELD_MAX) {
    faults.push({
      pointer: '/imagined',
      code: 'too-much-memory',
      message:
        `The simulation would hold ${held} numbers, more than ${HELD_MAX}. Fewer imagined, ` +
        'sites, strata or conditions hold less.',
    });
  }
  if (faults.length === 0) return;
  throw new ProblemError('invalid-request', 'This cannot be estimated.', { faults });
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
