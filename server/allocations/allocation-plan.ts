import type { AllocationPlan } from '#core/allocation/ledger.ts';
import type { RegisteredProtocol } from '#server/studies/service.ts';

/** What a registered protocol version hands out, and by which rule. */
export function allocationPlanOf(registered: RegisteredProtocol): AllocationPlan {
  const { set, protocol } = registered;
  const factorKeys = protocol.betweenFactors.map(({ key }) => key);
  return { set, policy: protocol.policy, factorKeys };
}
