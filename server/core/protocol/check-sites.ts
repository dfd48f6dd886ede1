import { isWholeFrom, type ProtocolFault } from './fault.ts';
import type { SiteTarget } from './protocol.ts';

/** Faults of the sites and their target enrolments. Whether a site exists is not known here. */
export function siteFaults(sites: readonly SiteTarget[]): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  if (sites.length === 0) {
    faults.push({ pointer: '/sites', code: 'no-sites', message: 'A protocol needs a site' });
  }
  const seen = new Set<string>();
  for (const [index, { siteId, targetEnrolment }] of sites.entries()) {
    if (seen.has(siteId)) {
      const message = `The site ${siteId} stands more than once`;
      faults.push({ pointer: `/sites/${index}/siteId`, code: 'duplicate-site', message });
    }
    seen.add(siteId);
    if (!isWholeFrom(1, targetEnrolment)) {
      faults.push({
        pointer: `/sites/${index}/targetEnrolment`,
        code: 'unusable-target-enrolment',
        message: 'A target enrolment must be a whole number of at least 1',
      });
    }
  }
  return faults;
}
