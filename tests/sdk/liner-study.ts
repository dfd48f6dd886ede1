import { Fairturn, type Study } from '../../client-sdk/src/index.ts';
import { exampleProtocol } from '../support/example-protocol.ts';
import type { ListeningService } from './listening-service.ts';

/**
 * An enrolling study of one lab at one site, made through the SDK, as a lead and stations meet it.
 */
export interface LinerStudy {
  readonly study: Study;
  readonly lead: Fairturn;
  /** Tokens of the site's two stations. */
  readonly stationTokens: readonly [string, string];
}

const DAY_SECONDS = 86_400;

export async function createLinerStudy(
  service: ListeningService,
  options: { name: string; washout?: { minimum: string; maximum: string | null } },
): Promise<LinerStudy> {
  const { administrator, url } = service;
  const { name } = options;
  const lab = await administrator.labs.create({ name });
  const site = await administrator.sites.create({ labId: lab.id, name: 'Harbour' });
  const account = await administrator.accounts.create({ name: 'Lead', labId: lab.id });
  const leadToken = await administrator.tokens.create({
    role: 'study-lead',
    accountId: account.id,
    labId: lab.id,
    label: 'desk',
    lifetimeSeconds: DAY_SECONDS,
  });
  const lead = new Fairturn({ url, token: String(leadToken.token) });
  const stationTokens = await Promise.all(
    ['Bench 1', 'Bench 2'].map(async (bench) => {
      const station = await administrator.stations.create({ siteId: site.id, name: bench });
      const { token } = await administrator.tokens.create({
        role: 'station',
        stationId: station.id,
        label: bench,
        lifetimeSeconds: DAY_SECONDS,
      });
      return String(token);
    }),
  );
  const study = await lead.studies.create({ name });
  const protocol = exampleProtocol([{ siteId: site.id, targetEnrolment: 60 }]);
  const { washout = protocol.periods.washout } = options;
  const { revision } = await study.saveDraft({
    ...protocol,
    periods: { ...protocol.periods, washout },
  });
  await study.register({ revision });
  return { study, lead, stationTokens: [stationTokens[0] ?? '', stationTokens[1] ?? ''] };
}
