import { fileURLToPath } from 'node:url';
import { Worker } from 'node:worker_threads';
import type { AllocationPlan } from '#core/allocation/ledger.ts';
import type { Predictability, SimulatedEnrolment } from '#core/allocation/predictability.ts';

/** What the thread is started with: one enrolment under several plans. */
export interface EstimateInput {
  readonly plans: readonly AllocationPlan[];
  readonly enrolment: SimulatedEnrolment;
}

/** By plan, in their order. */
export type EstimateOutput = readonly Predictability[];

const THREAD_PROGRAM = fileURLToPath(new URL('./predictability-thread.ts', import.meta.url));

/**
 * Estimates beside the event loop, which goes on answering arrivals.
 *
 * @throws when the thread itself breaks, for lack of memory for example
 */
export function estimateInThread(input: EstimateInput): Promise<EstimateOutput> {
  const thread = new Worker(THREAD_PROGRAM, { workerData: input });
  return new Promise((resolve, reject) => {
    thread.once('message', (output: EstimateOutput) => resolve(output));
    thread.once('error', reject);
    thread.once('exit', (code) => {
      reject(new Error(`The estimate's thread ended with code ${code}.`));
    });
  });
}
