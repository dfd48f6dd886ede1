// Compiled, not run: what the SDK's types must take and must refuse. An expected error that does not
// come is an error itself.
import { Fairturn, isProblem, type ProblemType, type Site } from '@fairturn/client';
import { openFileOutbox } from '@fairturn/client/node';

export const fairturn = new Fairturn({ url: 'https://fairturn.invalid', token: 'x' });

// @ts-expect-error a client needs a token
new Fairturn({ url: 'https://fairturn.invalid' });

// @ts-expect-error a lab has a name
fairturn.labs.create({});

// @ts-expect-error there is no such field
fairturn.labs.create({ name: 'Harbour', colour: 'blue' });

// @ts-expect-error a station's token names its station, not a lab
fairturn.tokens.create({ role: 'station', labId: 'x', label: 'bench', lifetimeSeconds: 60 });

// @ts-expect-error there is no such role
fairturn.tokens.create({ role: 'owner', accountId: 'x', label: 'desk', lifetimeSeconds: 60 });

// @ts-expect-error there is no such kind of problem
export const unknownProblem: ProblemType = 'participant-lost';

export async function walk(): Promise<Site[]> {
  const sites: Site[] = [];
  for await (const site of fairturn.sites.list()) sites.push(site);
  // @ts-expect-error a list is walked or asked for whole, it is no array
  fairturn.sites.list().map((site) => site.id);
  return sites;
}

export async function narrowed(): Promise<'already-exists' | null> {
  try {
    await fairturn.labs.create({ name: 'Harbour' });
  } catch (error) {
    if (isProblem(error, 'already-exists')) return error.type;
    // @ts-expect-error there is no such kind of problem
    if (isProblem(error, 'exists')) return null;
  }
  return null;
}

// @ts-expect-error the folder is a path
openFileOutbox(7);
