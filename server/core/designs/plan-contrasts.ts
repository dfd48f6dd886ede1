import { conditionKeysOf } from '../protocol/check-factors.ts';
import { schemeFaults } from '../protocol/check-scheme.ts';
import { comparedConditions } from '../protocol/compared-conditions.ts';
import type { ProtocolFault } from '../protocol/fault.ts';
import type { MeasurePlan, Protocol } from '../protocol/protocol.ts';
import { directEfficiency } from './efficiency.ts';
import { sequencesOf } from './sequences-of.ts';

/** How many comparisons a message names before it counts the rest. */
const NAMED_MAX = 5;

/**
 * Planned comparisons adjusted for period that the scheme cannot make, even when everybody
 * completes: its sequences do not connect the two conditions, or confound them with periods.
 *
 * Unadjusted comparisons are made within participants who meet both conditions and are not looked
 * at; nor is a protocol whose factors or scheme are faulty.
 *
 * @returns faults with pointers from the protocol's root, one a plan at most
 */
export function planContrastFaults(protocol: Protocol): ProtocolFault[] {
  const isAdjusted = (plan: MeasurePlan) => plan.primaryEstimate === 'adjusted-for-period';
  if (!protocol.analysis.measures.some(isAdjusted)) return [];
  const keys = conditionKeysOf(protocol.withinFactors);
  const periods = protocol.periods.count;
  if (keys === null || schemeFaults(protocol.scheme, keys, periods).length > 0) return [];
  const { contrasts: pairs } = directEfficiency(
    sequencesOf(protocol.scheme, keys, periods),
    keys.length,
  );
  const compared = new Set(comparedConditions(protocol.scheme, keys));
  const missing = pairs
    .filter(({ variance }) => !variance.estimable)
    .map(({ first, second }) => [keys[first] ?? '', keys[second] ?? ''] as const)
    .filter((pair) => pair.every((key) => compared.has(key)));
  const faults: ProtocolFault[] = [];
  for (const [index, plan] of protocol.analysis.measures.entries()) {
    if (!isAdjusted(plan)) continue;
    const { contrasts } = plan;
    const planned =
      contrasts.kind === 'all-pairs'
        ? missing
        : missing.filter((pair) => pair.includes(contrasts.reference));
    if (planned.length === 0) continue;
    const named = planned.slice(0, NAMED_MAX).map((pair) => pair.join(' and '));
    const rest = planned.length - named.length;
    const message =
      `The sequences cannot compare ${named.join(', ')}${rest > 0 ? ` and ${rest} more` : ''} ` +
      'adjusted for period; add sequences in which they, or a condition between them, meet in ' +
      'more than one order';
    const pointer = `/analysis/measures/${index}/contrasts`;
    faults.push({ pointer, code: 'contrast-not-estimable', message });
  }
  return faults;
}
