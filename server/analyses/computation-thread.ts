// The thread's program: computes one report from what it was started with, and ends.
import { parentPort, workerData } from 'node:worker_threads';
import { compute } from './computation.ts';
import type { ThreadData, ThreadMessage } from './compute-in-thread.ts';

const { input, stop } = workerData as ThreadData;

const post = (message: ThreadMessage): void => parentPort?.postMessage(message);

const outcome = compute(input, {
  onProgress: (fraction, stage) => post({ kind: 'progress', fraction, stage }),
  shouldStop: () => Atomics.load(stop, 0) === 1,
});
post({ kind: 'outcome', outcome });
