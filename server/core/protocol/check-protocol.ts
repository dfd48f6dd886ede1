import { analysisFaults } from './check-analysis.ts';
import { conditionKeysOf, factorFaults } from './check-factors.ts';
import { exclusionFaults, measureFaults } from './check-measures.ts';
import { periodFaults } from './check-periods.ts';
import { policyFaults } from './check-policy.ts';
import { schemeFaults } from './check-scheme.ts';
import { siteFaults } from './check-sites.ts';
import { keyFaults, type ProtocolFault } from './fault.ts';
import type { Protocol } from './protocol.ts';

/**
 * Everything that keeps a protocol from being registered, all at once, in document order by part:
 * hypotheses, factors, scheme, policy, periods, sites, measures, exclusions, analysis.
 *
 * The document's shape (types, members present) is taken as given. Parts that depend on a faulty
 * part are checked as far as they can be: with too many conditions to list, the scheme, and what
 * names a condition, is not checked until that is mended.
 *
 * @returns faults, each with an RFC 6901 pointer into the document; none when it can be registered
 */
export function checkProtocol(protocol: Protocol): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  if (protocol.title.trim() === '') {
    faults.push({ pointer: '/title', code: 'blank-title', message: 'A protocol needs a title' });
  }
  faults.push(...keyFaults(protocol.hypotheses, '/hypotheses', 'hypothesis'));
  faults.push(...factorFaults(protocol));
  const conditionKeys = conditionKeysOf(protocol.withinFactors);
  if (conditionKeys !== null) {
    faults.push(...schemeFaults(protocol.scheme, conditionKeys, protocol.periods.count));
  }
  faults.push(...policyFaults(protocol.policy, protocol.betweenFactors));
  faults.push(...periodFaults(protocol.periods));
  faults.push(...siteFaults(protocol.sites));
  faults.push(...measureFaults(protocol.measures));
  faults.push(...exclusionFaults(protocol));
  faults.push(...analysisFaults(protocol, conditionKeys));
  return faults;
}
