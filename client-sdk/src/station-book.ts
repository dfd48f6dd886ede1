import {
  type DuePeriod as CoreDuePeriod,
  duePeriod,
} from '../../server/core/allocation/washout.ts';
import type { Outbox, OutboxMessage } from './outbox.ts';
import type { KeyValueStore } from './outbox-storage.ts';
import { NetworkError, ProblemError } from './problems.ts';
import type {
  Arrival,
  ArrivalRequest,
  DuePeriod,
  PeriodStartRequest,
  TrialRow,
  WithdrawalRequest,
} from './schemas.ts';
import type { Study } from './study.ts';
import { ndjson } from './uploads.ts';

export interface StationBookOptions {
  readonly study: Study;
  /** Takes what the station cannot send at once. */
  readonly outbox: Outbox;
  /** Where allocations are kept; on a station, one that survives its restart. */
  readonly store: KeyValueStore;
}

/** What is due, and who said so: the service, or the station from what it knows. */
export type BookedDuePeriod = DuePeriod & { readonly source: 'service' | 'station' };

/** Whether something reached the service already or waits in the outbox. */
export type Delivery = 'sent' | 'queued';

/** The link is down and this participant is not in the book. */
export class NotInBookError extends Error {
  override readonly name = 'NotInBookError';
}

/** A participant as the station knows them. */
interface Booked {
  readonly arrival: Arrival;
  /** Starts known to the service and starts that still wait in the outbox; ISO 8601. */
  readonly starts: readonly { readonly period: number; readonly startedAt: string }[];
  readonly withdrawn: boolean;
}

/**
 * A station's own book of its participants, kept so that work goes on while the link is down: who
 * has which sequence, what was started when, and therefore what is due. What the station does
 * meanwhile goes through its outbox, with the time at which it really was.
 *
 * Somebody new cannot be checked in without the service, since only the service hands out
 * sequences. The book holds pseudonymous codes, which are personal data: `forget` whoever is done.
 */
export class StationBook {
  readonly #study: Study;
  readonly #outbox: Outbox;
  readonly #store: KeyValueStore;

  constructor({ study, outbox, store }: StationBookOptions) {
    this.#study = study;
    this.#outbox = outbox;
    this.#store = store;
  }

  /**
   * Checks a participant in and writes the allocation into the book.
   *
   * @throws {NetworkError} while the link is down
   */
  async arrive(request: ArrivalRequest): Promise<Arrival> {
    await this.#outbox.flush();
    const arrival = await this.#study.arrive(request);
    const starts = arrival.periods.flatMap(({ period, startedAt }) =>
      startedAt === null ? [] : [{ period, startedAt }],
    );
    await this.#write({ arrival, starts, withdrawn: false });
    return arrival;
  }

  /**
   * What is due for a participant. While the link is down the station works it out by itself,
   * washout included, from the allocation and the starts in its book.
   *
   * @throws {NotInBookError} when the link is down and the participant is not in the book
   */
  async due(code: string): Promise<BookedDuePeriod> {
    const { stoppedBy } = await this.#outbox.flush();
    if (stoppedBy === null) {
      try {
        return { ...(await this.#study.due(code)), source: 'service' };
      } catch (error) {
        if (!(error instanceof NetworkError)) throw error;
      }
    }
    return dueByBook(await this.#booked(code), new Date());
  }

  /**
   * Notes that a period begins, now. When the link is down, the start waits in the outbox, and the
   * station itself refuses a period that is not due by its book.
   *
   * @throws {ProblemError} when it is refused, such as `period-not-due`; the book forgets the start
   * @throws {NotInBookError} when the link is down and the participant is not in the book
   */
  async startPeriod(code: string, start: PeriodStartRequest): Promise<Delivery> {
    const startedAt = start.startedAt ?? new Date().toISOString();
    const due = await this.due(code);
    if (due.source === 'station' && start.deviation === undefined) {
      requireDue(dueByBook(await this.#booked(code), new Date(startedAt)), start.period);
    }
    const change = ({ starts, ...booked }: Booked): Booked => ({
      ...booked,
      starts: [
        ...starts.filter(({ period }) => period !== start.period),
        { period: start.period, startedAt },
      ],
    });
    return await this.#deliver(code, 'period-starts', { ...start, startedAt }, change);
  }

  /** Notes that a participant stops. When the link is down, the note waits in the outbox. */
  async withdraw(code: string, withdrawal: WithdrawalRequest): Promise<Delivery> {
    const withdrawnAt = withdrawal.withdrawnAt ?? new Date().toISOString();
    return await this.#deliver(code, 'withdrawal', { ...withdrawal, withdrawnAt }, (booked) => ({
      ...booked,
      withdrawn: true,
    }));
  }

  /** Uploads trials, all or nothing. When the link is down, they wait in the outbox. */
  async upload(rows: Iterable<TrialRow>): Promise<Delivery> {
    const body = ndjson([...rows].map((row) => JSON.stringify(row)));
    const path = `/v1/studies/${this.#study.id}/uploads?acceptance=all-or-nothing`;
    return await this.#send({ path, body, mediaType: 'application/x-ndjson' });
  }

  /** The allocations in the book. */
  async participants(): Promise<Arrival[]> {
    const arrivals: Arrival[] = [];
    for (const key of await this.#store.keys()) {
      const text = key.startsWith(this.#prefix) ? await this.#store.get(key) : null;
      if (text !== null) arrivals.push((JSON.parse(text) as Booked).arrival);
    }
    return arrivals;
  }

  /** Takes a participant out of the book. */
  async forget(code: string): Promise<void> {
    await this.#store.delete(this.#keyOf(code));
  }

  /**
   * Changes the book, then sends, or queues what cannot be sent. What the service refuses leaves
   * the book as it was and the outbox without it.
   */
  async #deliver(
    code: string,
    what: string,
    body: object,
    change: (booked: Booked) => Booked,
  ): Promise<Delivery> {
    const participant = `/v1/studies/${this.#study.id}/participants/${encodeURIComponent(code)}`;
    const message = { path: `${participant}/${what}`, body: JSON.stringify(body) };
    const before = await this.#read(code);
    if (before !== null) await this.#write(change(before));
    try {
      return await this.#send(message);
    } catch (error) {
      if (error instanceof ProblemError && before !== null) await this.#write(before);
      throw error;
    }
  }

  /**
   * @throws {ProblemError} when the service refuses it; it is not left in the outbox then
   */
  async #send(message: OutboxMessage): Promise<Delivery> {
    const { number } = await this.#outbox.add(message);
    await this.#outbox.flush();
    const refused = this.#outbox.setAside.find((item) => item.number === number);
    if (refused !== undefined && refused.problem !== null) {
      await this.#outbox.discard(number);
      throw new ProblemError(refused.problem);
    }
    return this.#outbox.waiting.some((item) => item.number === number) ? 'queued' : 'sent';
  }

  async #booked(code: string): Promise<Booked> {
    const booked = await this.#read(code);
    if (booked !== null) return booked;
    throw new NotInBookError('The link is down, and this participant is not in the book.');
  }

  async #read(code: string): Promise<Booked | null> {
    const text = await this.#store.get(this.#keyOf(code));
    return text === null ? null : (JSON.parse(text) as Booked);
  }

  async #write(booked: Booked): Promise<void> {
    await this.#store.set(this.#keyOf(booked.arrival.participant.code), JSON.stringify(booked));
  }

  get #prefix(): string {
    return `fairturn-book/${this.#study.id}/`;
  }

  /** Codes are compared without regard to case. */
  #keyOf(code: string): string {
    return `${this.#prefix}${code.toUpperCase()}`;
  }
}

/** What is due by the rule that the service applies too, on what the station knows. */
function dueByBook({ arrival, starts, withdrawn }: Booked, now: Date): BookedDuePeriod {
  const known = {
    participant: arrival.participant,
    washout: arrival.washout,
    judgedAt: now.toISOString(),
    source: 'station' as const,
  };
  const due = withdrawn ? { state: 'finished' as const } : coreDue(arrival, starts, now);
  if (due.state === 'finished') {
    const nothing = { period: null, visit: null, condition: null, dueFrom: null, dueUntil: null };
    return { ...known, state: 'finished', ...nothing };
  }
  const { state, period, visit, earliestMs, latestMs } = due;
  return {
    ...known,
    state,
    period,
    visit,
    condition: arrival.periods.find((one) => one.period === period)?.condition ?? null,
    dueFrom: earliestMs === null ? null : new Date(earliestMs).toISOString(),
    dueUntil: latestMs === null ? null : new Date(latestMs).toISOString(),
  };
}

/** As the service would refuse it. */
function requireDue(due: BookedDuePeriod, period: number): void {
  if (due.state === 'due' && due.period === period) return;
  const said = due.period === null ? 'no period is due' : `period ${due.period} is ${due.state}`;
  throw new ProblemError({
    type: '/problems/period-not-due',
    title: 'This period is not due yet',
    status: 409,
    detail: `By the station's own book, ${said}; another start is a deviation and needs a reason.`,
    instance: '/station-book',
  });
}

function coreDue(
  { periods, washout }: Arrival,
  starts: Booked['starts'],
  now: Date,
): CoreDuePeriod {
  const visits: number[][] = [];
  for (const { period, visit } of periods) {
    visits[visit - 1] = [...(visits[visit - 1] ?? []), period];
  }
  return duePeriod(
    { count: periods.length, visits, washout },
    starts.map(({ period, startedAt }) => ({ period, startedAtMs: Date.parse(startedAt) })),
    now.getTime(),
  );
}
