// The thread's program: estimates what it was started with, and ends.
import { parentPort, workerData } from 'node:worker_threads';
import { predictability } from '#core/allocation/predictability.ts';
import type { EstimateInput, EstimateOutput } from './predictability-in-thread.ts';

const { plans, enrolment }: EstimateInput = workerData;

const output: EstimateOutput = plans.map((plan) => predictability(plan, enrolment));
parentPort?.postMessage(output);
