// One testing station, as a process of its own: checks participants in, runs their periods, uploads
// their trials. Its orders come in one message, its news go back as messages.
import {
  Fairturn,
  isProblem,
  Outbox,
  StationBook,
  type Study,
  type TrialRow,
} from '@fairturn/client';
import { openFileOutbox, openFileStore } from '@fairturn/client/node';
import { REPETITIONS } from './protocol.ts';
import { drawsFrom, type SimulatedParticipant, simulatedParticipant } from './simulation.ts';
import { LINERS } from './truth.ts';

export interface StationOrders {
  readonly url: string;
  readonly token: string;
  readonly studyId: string;
  readonly name: string;
  readonly operator: string;
  readonly folder: string;
  readonly seed: string;
  /** The station's n-th participant stops after that many periods. */
  readonly withdrawal?: { readonly nth: number; readonly afterPeriod: number; readonly why: Why };
  /** What else goes otherwise than planned, each with the station's n-th participant. */
  readonly repeatedUpload?: number;
  readonly wrongLiner?: number;
  readonly mistypedTime?: number;
  readonly linkDown?: number;
}

type Why = 'own-wish' | 'unwell' | 'no-show' | 'schedule';

export interface StationNews {
  readonly station: string;
  readonly text: string;
  readonly finished?: { readonly arrived: number; readonly completed: number };
}

let linkIsDown = false;

process.once('message', (orders: StationOrders) => {
  run(orders).then(
    () => process.disconnect(),
    (error: unknown) => {
      process.stderr.write(`${orders.name}: ${String(error)}\n`);
      process.exit(1);
    },
  );
});

async function run(orders: StationOrders): Promise<void> {
  const { url, token, operator, studyId, folder } = orders;
  const fairturn = new Fairturn({
    url,
    token,
    operator,
    retry: { attempts: 3, pauseMs: 50 },
    fetch: (address, init) =>
      linkIsDown ? Promise.reject(new Error('The link is down.')) : fetch(address, init),
  });
  const study = fairturn.study(studyId);
  const outbox = await Outbox.open({ fairturn, storage: await openFileOutbox(folder) });
  const store = await openFileStore(`${folder}/book`);
  const station = new Station(orders, study, new StationBook({ study, outbox, store }));
  const counts = await station.takeEverybody();
  const { waiting, setAside } = outbox;
  if (waiting.length + setAside.length > 0) throw new Error('Something was left in the outbox.');
  await outbox.close();
  tell(orders.name, 'done', counts);
}

function tell(station: string, text: string, finished?: StationNews['finished']): void {
  const news: StationNews = { station, text, ...(finished === undefined ? {} : { finished }) };
  process.send?.(news);
}

class Station {
  readonly #orders: StationOrders;
  readonly #study: Study;
  readonly #book: StationBook;

  constructor(orders: StationOrders, study: Study, book: StationBook) {
    this.#orders = orders;
    this.#study = study;
    this.#book = book;
  }

  /** Takes participants until the site has issued all its slots. */
  async takeEverybody(): Promise<{ arrived: number; completed: number }> {
    let completed = 0;
    for (let nth = 1; ; nth += 1) {
      try {
        completed += (await this.#takeOne(nth)) ? 1 : 0;
      } catch (error) {
        if (isProblem(error, 'site-full')) return { arrived: nth - 1, completed };
        throw error;
      }
    }
  }

  async #takeOne(nth: number): Promise<boolean> {
    const { name, seed, withdrawal } = this.#orders;
    const arrival = await this.#book.arrive({ kind: 'new' });
    const { code } = arrival.participant;
    if (arrival.replacement) tell(name, `${code} takes over slot ${arrival.slotNumber}`);
    const person = simulatedParticipant(drawsFrom(`${seed}/${name}/${nth}`));
    const stopsAfter = withdrawal?.nth === nth ? withdrawal.afterPeriod : arrival.periods.length;
    const rows: TrialRow[] = [];
    let before: string | null = null;
    for (let period = 1; period <= stopsAfter; period += 1) {
      this.#switchLink(nth, period);
      before = await this.#runPeriod({ nth, code, period, person, before, rows });
    }
    if (rows.length > 0) await this.#uploadRows(nth, rows);
    linkIsDown = false;
    if (withdrawal?.nth !== nth) return true;
    await this.#book.withdraw(code, {
      reasonCode: withdrawal.why,
      periodReached: withdrawal.afterPeriod,
    });
    tell(name, `${code} stops after period ${withdrawal.afterPeriod} (${withdrawal.why})`);
    return false;
  }

  /** Runs one period and gives the liner that was worn. */
  async #runPeriod(given: {
    nth: number;
    code: string;
    period: number;
    person: SimulatedParticipant;
    before: string | null;
    rows: TrialRow[];
  }): Promise<string> {
    const { nth, code, period, person, before, rows } = given;
    const due = await this.#book.due(code);
    if (due.state !== 'due' || due.period !== period || due.condition === null) {
      throw new Error(`Period ${period} of ${code} is not due: ${due.state}, ${due.period}.`);
    }
    await this.#book.startPeriod(code, { period });
    const liner = this.#linerWorn(nth, period, due.condition.key);
    const trials = person.period({
      periodIndex: period - 1,
      liner,
      before,
      repetitions: REPETITIONS,
    });
    for (const [index, trial] of trials.entries()) {
      const isMistyped = this.#orders.mistypedTime === nth && period === 1 && index === 0;
      if (isMistyped) tell(this.#orders.name, `${code}: a time is mistyped as 400 s`);
      rows.push({
        participant: code,
        period,
        repetition: index + 1,
        condition: liner,
        recordId: `${code}-${period}-${index + 1}`,
        values: {
          'pegboard-time': isMistyped ? 400 : trial.seconds,
          'pegs-dropped': trial.pegsDropped,
          'part-misseated': trial.misseated,
          ...(trial.comfort === null ? {} : { 'hand-comfort': trial.comfort }),
        },
        startedAt: new Date().toISOString(),
      });
    }
    return liner;
  }

  #linerWorn(nth: number, period: number, assigned: string): string {
    if (this.#orders.wrongLiner !== nth || period !== 2) return assigned;
    const other = LINERS.find(({ key }) => key !== assigned)?.key ?? assigned;
    tell(this.#orders.name, `the wrong liner is put on: ${other} instead of ${assigned}`);
    return other;
  }

  #switchLink(nth: number, period: number): void {
    if (this.#orders.linkDown !== nth || period !== 2) return;
    linkIsDown = true;
    tell(this.#orders.name, 'the link is down; the station goes on from its own book');
  }

  async #uploadRows(nth: number, rows: readonly TrialRow[]): Promise<void> {
    const { name, repeatedUpload } = this.#orders;
    if ((await this.#book.upload(rows)) === 'queued') {
      tell(name, `${rows.length} trials wait in the outbox until the link is back`);
    }
    if (repeatedUpload !== nth) return;
    const again = await this.#study.upload(rows);
    tell(name, `the same ${again.rows} trials sent again: ${again.repeated} were there already`);
  }
}
