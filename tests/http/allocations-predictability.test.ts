import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { gloveProtocol } from '../support/analysed-study.ts';
import { startTestService, type TestService } from '../support/app.ts';
import { type ColdStore, coldStore } from '../support/cold-store.ts';
import { exampleProtocol } from '../support/example-protocol.ts';

const PATH = '/v1/predictability-estimates';

let service: TestService;
let places: ColdStore;

beforeAll(async () => {
  service = await startTestService();
  places = await coldStore(service);
});
afterAll(() => service.close());

/** Four sequences under three policies. */
function body(changes: object = {}) {
  const { withinFactors, betweenFactors, scheme } = exampleProtocol([]);
  return {
    withinFactors,
    betweenFactors,
    scheme,
    periods: 4,
    policies: [
      { kind: 'balanced' },
      { kind: 'permuted-blocks', multiples: [1, 2] },
      {
        kind: 'minimisation',
        imbalance: 'variance',
        weights: { site: 1, study: 1, factors: [{ factor: 'shift', weight: 1 }] },
        bestProbability: 0.8,
      },
    ],
    sites: 2,
    stationsPerSite: 2,
    participantsPerSite: 8,
    studies: 20,
    imagined: 4,
    ...changes,
  };
}

describe('an estimate of predictability', () => {
  it('gives every policy its shares, the same for the same seed', async () => {
    const first = await places.lead.post(PATH, body());
    expect(first.status).toBe(200);
    const { seed, chance, sequences, policies } = first.body;
    expect([chance, sequences]).toEqual([0.25, 4]);
    expect(policies.map(({ policy }: { policy: unknown }) => policy)).toEqual(body().policies);
    for (const { station, site, study } of policies) {
      for (const { estimate, standardError } of [station, site, study]) {
        expect(estimate).toBeGreaterThan(0);
        expect(estimate).toBeLessThanOrEqual(1);
        expect(standardError).toBeGreaterThan(0);
      }
    }
    expect((await places.lead.post(PATH, body({ seed }))).body).toEqual(first.body);
    expect((await places.lead.post(PATH, body())).body.seed).not.toBe(seed);
  });

  it('meets what can be counted by hand', async () => {
    // published: with r of 4 sequences left one guess in r is right: (1/4 + 1/3 + 1/2 + 1) / 4
    const answer = await places.lead.post(
      PATH,
      body({ betweenFactors: [], policies: [{ kind: 'balanced' }], sites: 1, stationsPerSite: 1 }),
    );
    const [{ station, site, study }] = answer.body.policies;
    for (const { estimate } of [station, site, study]) expect(estimate).toBeCloseTo(25 / 48, 12);
  });

  it('leaves the service free to answer meanwhile', async () => {
    let estimated = false;
    const big = places.lead.post(PATH, body({ studies: 1000, imagined: 16 })).then((answer) => {
      estimated = true;
      return answer;
    });
    for (let requests = 0; requests < 5; requests += 1) {
      expect((await places.lead.get('/v1/tokens/own')).status).toBe(200);
    }
    expect(estimated).toBe(false);
    expect((await big).status).toBe(200);
  });

  it('is refused while too many wait', async () => {
    const answers = await Promise.all(
      Array.from({ length: 12 }, () => places.lead.post(PATH, body({ studies: 100 }))),
    );
    const statuses = answers.map(({ status }) => status).sort();
    expect(statuses).toEqual([...new Array(8).fill(200), ...new Array(4).fill(429)]);
    expect((await places.lead.post(PATH, body())).status).toBe(200);
  });
});

describe('what cannot be estimated', () => {
  const faultsOf = async (changes: object) => {
    const answer = await places.lead.post(PATH, body(changes));
    const faults: { pointer: string; code: string }[] = answer.body.faults;
    return [answer.status, ...faults.map(({ pointer, code }) => `${pointer} ${code}`)];
  };

  it('is named: factors, scheme and each policy', async () => {
    const faults = await faultsOf({
      betweenFactors: [],
      periods: 3,
      policies: [...body().policies, { kind: 'permuted-blocks', multiples: [0] }],
    });
    expect(faults).toEqual([
      422,
      '/scheme scheme-needs-periods-equal-to-conditions',
      '/policies/2/weights/factors/0/factor unknown-factor',
      '/policies/3/multiples/0 unusable-block-multiple',
    ]);
  });

  it('is named: too few participants, too much work or memory, a malformed seed', async () => {
    expect(await faultsOf({ participantsPerSite: 2, stationsPerSite: 3 })).toEqual([
      400,
      '/participantsPerSite fewer-participants-than-stations',
    ]);
    expect(await faultsOf({ studies: 1000, imagined: 64, sites: 50 })).toEqual([
      400,
      '/studies too-much-work',
    ]);
    expect(
      await faultsOf({ studies: 2, imagined: 256, sites: 50, participantsPerSite: 2 }),
    ).toEqual([400, '/imagined too-much-memory']);
    expect((await faultsOf({ seed: 'ABC' }))[0]).toBe(400);
    expect((await faultsOf({ policies: [] }))[0]).toBe(400);
  });

  it('asks for somebody who plans studies', async () => {
    const { withinFactors, scheme } = gloveProtocol(places.harbour.id);
    const [station] = places.harbour.stations;
    const answer = await station.post(PATH, body({ withinFactors, scheme, periods: 2 }));
    expect(answer.status).toBe(403);
  });
});
