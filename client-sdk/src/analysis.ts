import { answered, type Connection } from './connection.ts';
import { eventsIn, type ServerSentEvent } from './events.ts';
import { ProblemError } from './problems.ts';
import { Report } from './report.ts';
import { pause } from './retry.ts';
import type { AnalysisDetails } from './schemas.ts';

export interface WaitOptions {
  /** Called with each state and progress that the service tells. */
  readonly onProgress?: (analysis: AnalysisDetails) => void;
  readonly signal?: AbortSignal;
  /** Pause between questions while the stream of events cannot be had. Default: 1 s. */
  readonly pollMs?: number;
}

/** The analysis ended without a report. */
export class AnalysisEndedError extends Error {
  override readonly name = 'AnalysisEndedError';
  readonly analysis: AnalysisDetails;

  constructor(analysis: AnalysisDetails) {
    super(
      analysis.state === 'cancelled'
        ? 'The analysis was cancelled.'
        : `The analysis failed: ${analysis.failure ?? 'no reason was given'}`,
    );
    this.analysis = analysis;
  }
}

const DEFAULT_POLL_MS = 1000;

/** Three times the service's heartbeat: a stream quiet for so long is dead. */
const QUIET_MS_MAX = 45_000;

/** A job that runs the registered plan. */
export class Analysis {
  readonly id: string;
  readonly #connection: Connection;

  constructor(connection: Connection, id: string) {
    this.#connection = connection;
    this.id = id;
  }

  details(signal?: AbortSignal): Promise<AnalysisDetails> {
    const params = { path: { analysisId: this.id } };
    const abort = signal === undefined ? {} : { signal };
    return answered(this.#connection.api.GET('/v1/analyses/{analysisId}', { params, ...abort }));
  }

  /** Cancels: at once when queued, at its next stage when running. */
  cancel(): Promise<AnalysisDetails> {
    const params = { path: { analysisId: this.id } };
    return answered(
      this.#connection.api.POST('/v1/analyses/{analysisId}/cancellation', { params }),
    );
  }

  /**
   * Waits until the analysis has ended: by its stream of events, and by asking where that breaks.
   *
   * @throws {AnalysisEndedError} when it failed or was cancelled
   */
  async wait(options: WaitOptions = {}): Promise<AnalysisDetails> {
    for (;;) {
      const ended = (await this.#follow(options)) ?? (await this.#ask(options));
      if (ended?.state === 'succeeded') return ended;
      if (ended !== null) throw new AnalysisEndedError(ended);
      await pause(options.pollMs ?? DEFAULT_POLL_MS, options.signal);
    }
  }

  /**
   * The report that the analysis filed; waits for it.
   *
   * @throws {AnalysisEndedError} when it failed or was cancelled
   */
  async report(options: WaitOptions = {}): Promise<Report> {
    const { reportId } = await this.wait(options);
    if (reportId === null) throw new Error(`Analysis ${this.id} succeeded without a report.`);
    return new Report(this.#connection, reportId);
  }

  /** Follows the events; null when the stream broke off before the end. */
  async #follow({ onProgress, signal }: WaitOptions): Promise<AnalysisDetails | null> {
    for await (const { event, data } of this.#events(signal)) {
      if (event !== 'progress' && event !== 'ended') continue;
      const analysis: AnalysisDetails = JSON.parse(data);
      onProgress?.(analysis);
      if (event === 'ended') return analysis;
    }
    return null;
  }

  /** The events until the stream ends, breaks or falls silent. */
  async *#events(signal?: AbortSignal): AsyncGenerator<ServerSentEvent, void, undefined> {
    const abort = new AbortController();
    const stop = () => abort.abort(signal?.reason);
    signal?.addEventListener('abort', stop, { once: true });
    if (signal?.aborted === true) stop();
    let quiet: ReturnType<typeof setTimeout> | undefined;
    const listen = () => {
      clearTimeout(quiet);
      quiet = setTimeout(() => abort.abort(new Error('The stream fell silent.')), QUIET_MS_MAX);
    };
    try {
      const { body } = await this.#connection.send({
        method: 'GET',
        path: `/v1/analyses/${this.id}/events`,
        headers: { accept: 'text/event-stream' },
        streamed: true,
        signal: abort.signal,
      });
      listen();
      if (body !== null) yield* eventsIn(body, listen);
    } catch (error) {
      if (signal?.aborted === true) throw signal.reason;
      // A refusal will be the same for whoever asks again; a broken stream will not.
      if (error instanceof ProblemError && error.status < 500) throw error;
    } finally {
      clearTimeout(quiet);
      signal?.removeEventListener('abort', stop);
    }
  }

  async #ask({ onProgress, signal }: WaitOptions): Promise<AnalysisDetails | null> {
    const analysis = await this.details(signal);
    onProgress?.(analysis);
    return analysis.finishedAt === null ? null : analysis;
  }
}
