import { DomainError } from '../errors.ts';
import { type RandomStream, randomStream } from '../numerics/generator.ts';
import { createGuesser } from './guesser.ts';
import { keyedChance, SECRET_BYTES } from './keyed-draw.ts';
import { type AllocationPlan, emptyLedger, issueNext } from './ledger.ts';

/** Probabilities closer than this are a tie: sums of a few hundred products round far less. */
const TIE = 1e-9;

/** The studies that are simulated. */
export interface SimulatedEnrolment {
  readonly sites: number;
  readonly stationsPerSite: number;
  /** At each site; they are spread over its stations as evenly as can be. */
  readonly participantsPerSite: number;
  readonly strata: readonly string[];
  /** How many studies are simulated, from 2. */
  readonly studies: number;
  /** How many studies the guesser imagines where slots are hidden from it, from 1. */
  readonly imagined: number;
  /** 16 hexadecimal digits. */
  readonly seed: string;
}

/** A share of slots guessed right, from 0 to 1. */
export interface GuessedShare {
  readonly estimate: number;
  /** Of the estimate, from the differences between the simulated studies. */
  readonly standardError: number;
}

/** How often the next sequence is guessed right, by what the guesser has seen. */
export interface Predictability {
  /** By somebody who knows nothing but the sequences: 1/n. */
  readonly chance: number;
  /** The slots of one station. */
  readonly station: GuessedShare;
  /** The slots of all stations of one site. */
  readonly site: GuessedShare;
  /** Every slot of the study: exact but for the simulation, and no view can do better. */
  readonly study: GuessedShare;
}

interface SimulatedArrival {
  readonly site: number;
  readonly station: number;
  readonly stratum: string;
}

const VIEWS = ['station', 'site', 'study'] as const;
type View = (typeof VIEWS)[number];

/**
 * How often the next sequence can be guessed, by seeded simulation of whole studies.
 *
 * Participants come in random order over sites, stations and strata, and get what the policy hands
 * out under a secret drawn for each study. A guesser (see `createGuesser`) sees the first station
 * of the first site, that whole site, or the study, and guesses before every slot that it is to
 * see; where it holds m sequences for equally likely, one of them right counts 1/m. It also knows
 * who arrived where and in which stratum, which real stations hardly do: the estimates rather
 * overstate. With few imagined studies they rather understate for station and site, since the
 * guesser is then not the best. `study` bounds both from above, up to the simulation's error.
 *
 * The same input gives the same answer.
 *
 * @throws {DomainError} when a number is not whole or too small, or there are more stations at a
 *   site than participants, or as `emptyLedger` and `randomStream`
 */
export function predictability(
  plan: AllocationPlan,
  enrolment: SimulatedEnrolment,
): Predictability {
  requireEnrolment(enrolment);
  const shares: Record<View, number[]> = { station: [], site: [], study: [] };
  for (let study = 0; study < enrolment.studies; study += 1) {
    const stream = randomStream(enrolment.seed, study);
    const guessed = simulatedStudy(plan, enrolment, stream);
    for (const view of VIEWS) shares[view].push(guessed[view]);
  }
  return {
    chance: 1 / plan.set.sequences.length,
    station: shareOf(shares.station),
    site: shareOf(shares.site),
    study: shareOf(shares.study),
  };
}

function requireEnrolment(enrolment: SimulatedEnrolment): void {
  const { sites, stationsPerSite, participantsPerSite, studies, imagined, strata } = enrolment;
  const given = { sites, stationsPerSite, participantsPerSite, studies, imagined };
  for (const [name, value] of Object.entries(given)) {
    const minimum = name === 'studies' ? 2 : 1;
    if (Number.isSafeInteger(value) && value >= minimum) continue;
    throw new DomainError(`${name} must be a whole number from ${minimum}, not ${value}`);
  }
  if (participantsPerSite < stationsPerSite) {
    throw new DomainError('A site needs as many participants as stations at least');
  }
  if (strata.length === 0) throw new DomainError('There is no stratum');
}

/** The share of one study's slots that is guessed right in each view. */
function simulatedStudy(
  plan: AllocationPlan,
  enrolment: SimulatedEnrolment,
  stream: RandomStream,
): Record<View, number> {
  const studyId = 'simulated';
  const chance = keyedChance({ secret: secretFrom(stream), studyId, protocolVersion: 1 });
  const ledger = emptyLedger(plan, chance);
  const slotsBySite = new Array<number>(enrolment.sites).fill(0);
  const views = VIEWS.map((view) => ({
    view,
    guesser: createGuesser(plan, {
      imagined: seesAll(view, enrolment) ? 1 : enrolment.imagined,
      stream,
    }),
    guesses: 0,
    right: 0,
  }));
  for (const arrival of arrivalsOf(enrolment, stream)) {
    const place = { siteId: `${arrival.site}`, stratum: arrival.stratum };
    const slotNumber = (slotsBySite[arrival.site] ?? 0) + 1;
    slotsBySite[arrival.site] = slotNumber;
    const { sequenceIndex } = issueNext(ledger, { ...place, slotNumber });
    for (const one of views) {
      if (sees(one.view, arrival)) {
        one.guesses += 1;
        one.right += creditOf(one.guesser.probabilities(place), sequenceIndex);
        one.guesser.see(place, sequenceIndex);
      } else {
        one.guesser.miss(place);
      }
    }
  }
  const share = (view: View): number => {
    const found = views.find((one) => one.view === view);
    return found === undefined ? 0 : found.right / found.guesses;
  };
  return { station: share('station'), site: share('site'), study: share('study') };
}

/** 1 for a right guess, 0 for a wrong one; 1/m when it is one of m that are equally likely. */
function creditOf(chances: readonly number[], sequenceIndex: number): number {
  const most = Math.max(...chances);
  if ((chances[sequenceIndex] ?? 0) <= most - TIE) return 0;
  return 1 / chances.filter((chance) => chance > most - TIE).length;
}

function sees(view: View, { site, station }: SimulatedArrival): boolean {
  if (view === 'study') return true;
  return site === 0 && (view === 'site' || station === 0);
}

function seesAll(view: View, { sites, stationsPerSite }: SimulatedEnrolment): boolean {
  if (view === 'study') return true;
  return sites === 1 && (view === 'site' || stationsPerSite === 1);
}

/** Everybody, in random order (Fisher and Yates), each in a stratum drawn for them. */
function arrivalsOf(enrolment: SimulatedEnrolment, stream: RandomStream): SimulatedArrival[] {
  const { sites, stationsPerSite, participantsPerSite, strata } = enrolment;
  const arrivals = Array.from({ length: sites * participantsPerSite }, (_, index) => ({
    site: index % sites,
    station: Math.floor(index / sites) % stationsPerSite,
    stratum: strata[stream.nextBelow(strata.length)] ?? '',
  }));
  for (let last = arrivals.length - 1; last > 0; last -= 1) {
    const other = stream.nextBelow(last + 1);
    const [a, b] = [arrivals[last], arrivals[other]];
    if (a === undefined || b === undefined) continue;
    arrivals[last] = b;
    arrivals[other] = a;
  }
  return arrivals;
}

function secretFrom(stream: RandomStream): Uint8Array {
  return Uint8Array.from({ length: SECRET_BYTES }, () => stream.nextWord() & 0xff);
}

/** Mean over the studies, each with as many guesses as every other, and its standard error. */
function shareOf(shares: readonly number[]): GuessedShare {
  const count = shares.length;
  const mean = shares.reduce((sum, share) => sum + share, 0) / count;
  const squares = shares.reduce((sum, share) => sum + (share - mean) ** 2, 0);
  return { estimate: mean, standardError: Math.sqrt(squares / (count - 1) / count) };
}
