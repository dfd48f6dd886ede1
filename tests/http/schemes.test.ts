import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import type { ProtocolDocument } from '#server/studies/schemas.ts';
import { startTestService, type TestService } from '../support/app.ts';
import {
  arriveNew,
  type ColdStore,
  coldStore,
  coldStoreProtocol,
  openStudy,
} from '../support/cold-store.ts';

let service: TestService;
let places: ColdStore;

beforeAll(async () => {
  service = await startTestService();
  places = await coldStore(service);
});
afterAll(() => service.close());

type Scheme = ProtocolDocument['scheme'];

/** The cold store's protocol with its primary measure alone, over so many periods in one visit. */
function protocolWith(scheme: Scheme, periods: number): ProtocolDocument {
  const protocol = coldStoreProtocol(places, 40);
  const primary = 'pegboard-time';
  return {
    ...protocol,
    scheme,
    periods: {
      ...protocol.periods,
      count: periods,
      visits: [Array.from({ length: periods }, (_, index) => index + 1)],
    },
    measures: protocol.measures.filter(({ key }) => key === primary),
    exclusions: [],
    analysis: { measures: protocol.analysis.measures.filter(({ measure }) => measure === primary) },
  };
}

const seed = '00000000000000c0';
const generator = { name: 'philox4x32-10', version: 1 };

describe('a scheme that is registered', () => {
  it.each<[Scheme, number]>([
    [{ kind: 'orthogonal-latin-squares' }, 4],
    [{ kind: 'mirrored', base: 'cyclic-latin-square' }, 8],
    [{ kind: 'extra-period', base: 'williams' }, 5],
    [{ kind: 'balanced-incomplete-blocks', carryoverBalanced: false }, 3],
    [{ kind: 'balanced-incomplete-blocks', carryoverBalanced: true }, 2],
    [{ kind: 'permutation-fraction', squares: 2 }, 4],
    [{ kind: 'random-permutations', count: 7, seed, generator }, 4],
    [
      {
        kind: 'constrained-permutations',
        constraints: [{ kind: 'familiarisation-first', condition: 'none' }],
      },
      4,
    ],
  ])('is handed out as previewed, whole: %j over %i periods', async (scheme, periods) => {
    const protocol = protocolWith(scheme, periods);
    const { withinFactors } = protocol;
    const preview = await places.lead.post('/v1/scheme-previews', {
      withinFactors,
      scheme,
      periods,
    });
    expect(preview.status).toBe(200);
    const studyId = await openStudy(places.lead, protocol);
    const issued: string[] = [];
    for (let slot = 0; slot < preview.body.participantsPerBlock; slot += 1) {
      const answer = await arriveNew(places.harbour.stations[0], studyId);
      expect(answer.status).toBe(201);
      issued.push(
        answer.body.periods
          .map(({ condition }: { condition: { key: string } }) => condition.key)
          .join(' '),
      );
    }
    // By the guarantee of the policy: in one site and stratum, a whole block is every sequence once.
    const expected = preview.body.sequences.map(({ conditions }: { conditions: string[] }) =>
      conditions.join(' '),
    );
    expect(issued.toSorted()).toEqual(expected.toSorted());
  });
});
