// Compiled, not run: what the SDK's types must take and must refuse. An expected error that does
// not come is an error itself.
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

export const study = fairturn.study('x');

// @ts-expect-error an arrival is of somebody new or of somebody returning
study.arrive({ code: 'P07' });

// @ts-expect-error somebody returning has a code
study.arrive({ kind: 'returning' });

// @ts-expect-error a withdrawal has a coded reason
study.withdraw('P07', { reasonCode: 'bored', periodReached: 2 });

// @ts-expect-error a period is a number, from 1
study.startPeriod('P07', { period: 'first' });

// @ts-expect-error a correction needs a reason
study.correctTrial({ participant: 'P07', period: 1, repetition: 1, values: {} });

// @ts-expect-error what becomes of the rows without fault is one of two
study.upload([], { acceptance: 'some' });

// @ts-expect-error a trial says under which condition it was taken
study.upload([{ participant: 'P07', period: 1, repetition: 1, recordId: 'a', startedAt: '' }]);

export async function exported(): Promise<number> {
  let flagged = 0;
  for await (const trial of study.exportTrials()) flagged += trial.flags.length;
  // @ts-expect-error there is no such version of a trial
  for await (const trial of study.exportTrials({ versions: 'first' })) flagged += trial.period;
  return flagged;
}
