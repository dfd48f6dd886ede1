import { fileURLToPath } from 'node:url';
import { Worker } from 'node:worker_threads';
import type { ComputationInput, ComputationOutcome } from './computation.ts';

/** What the thread says: how far it is, and once, how it ended. */
export type ThreadMessage =
  | { readonly kind: 'progress'; readonly fraction: number; readonly stage: string }
  | { readonly kind: 'outcome'; readonly outcome: ComputationOutcome };

/** What the thread is started with. `stop` becomes 1 when the computation should end early. */
export interface ThreadData {
  readonly input: ComputationInput;
  readonly stop: Int32Array;
}

export interface ThreadedComputation {
  readonly outcome: Promise<ComputationOutcome>;
  /** Asks for an end at the next stage; the outcome is then `stopped`. */
  requestStop(): void;
}

const THREAD_PROGRAM = fileURLToPath(new URL('./computation-thread.ts', import.meta.url));

/**
 * Runs a computation beside the event loop, which goes on answering requests and telling the queue
 * that this worker lives.
 *
 * @param options.signal ends the thread at once; the outcome is then rejected
 * @throws (in `outcome`) when the thread itself breaks, for lack of memory for example
 */
export function computeInThread(
  input: ComputationInput,
  options: {
    readonly signal: AbortSignal;
    readonly onProgress: (fraction: number, stage: string) => void;
  },
): ThreadedComputation {
  const stop = new Int32Array(new SharedArrayBuffer(4));
  const workerData: ThreadData = { input, stop };
  const thread = new Worker(THREAD_PROGRAM, { workerData });
  const outcome = new Promise<ComputationOutcome>((resolve, reject) => {
    const abort = () => {
      reject(new Error('The computation was broken off.'));
      void thread.terminate();
    };
    thread.on('message', (message: ThreadMessage) => {
      if (message.kind === 'outcome') resolve(message.outcome);
      else options.onProgress(message.fraction, message.stage);
    });
    thread.once('error', reject);
    thread.once('exit', (code) => {
      options.signal.removeEventListener('abort', abort);
      reject(new Error(`The computation's thread ended with code ${code}.`));
    });
    if (options.signal.aborted) abort();
    else options.signal.addEventListener('abort', abort, { once: true });
  });
  return { outcome, requestStop: () => Atomics.store(stop, 0, 1) };
}
