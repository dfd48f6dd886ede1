import { type ChildProcess, fork } from 'node:child_process';
import { fileURLToPath } from 'node:url';
import type { Logger } from 'pino';

export interface WorkerProcessesOptions {
  readonly count: number;
  readonly databaseUrl: string;
  readonly logger: Logger;
  /** The program of a worker; the service's own when absent. */
  readonly program?: string;
}

export interface WorkerProcesses {
  /** Asks every worker to finish (SIGTERM) and kills those that have not after `withinSeconds`. */
  stop(withinSeconds: number): Promise<void>;
}

const WORKER_PROGRAM = fileURLToPath(new URL('../worker.ts', import.meta.url));

const RESTART_MS_MIN = 500;
const RESTART_MS_MAX = 60_000;
/** A worker that ran this long had started well: the next pause is the shortest again. */
const STEADY_MS = 60_000;

/**
 * Runs analysis workers as child processes and starts a crashed one again, after a pause that
 * doubles each time. A worker gets DATABASE_URL and a channel to its parent, whose closing tells it
 * that the service is gone.
 */
export function startWorkerProcesses(options: WorkerProcessesOptions): WorkerProcesses {
  const { logger, program = WORKER_PROGRAM } = options;
  const running = new Set<ChildProcess>();
  const waiting = new Set<NodeJS.Timeout>();
  let stopping = false;

  const start = (index: number, pauseMs: number): void => {
    const child = fork(program, {
      env: { ...process.env, DATABASE_URL: options.databaseUrl },
    });
    const startedAt = performance.now();
    running.add(child);
    logger.info({ worker: index, pid: child.pid }, 'worker started');
    const ended = (how: object): void => {
      if (!running.delete(child) || stopping) return;
      const steady = performance.now() - startedAt >= STEADY_MS;
      const waitMs = steady ? RESTART_MS_MIN : pauseMs;
      logger.error(
        { worker: index, ...how, restartInMs: waitMs },
        'worker ended; starting another',
      );
      const timer = setTimeout(() => {
        waiting.delete(timer);
        start(index, Math.min(2 * waitMs, RESTART_MS_MAX));
      }, waitMs);
      waiting.add(timer);
    };
    child.once('error', (err) => ended({ err }));
    child.once('exit', (code, signal) => ended({ code, signal }));
  };

  for (let index = 1; index <= options.count; index += 1) start(index, RESTART_MS_MIN);
  return {
    stop: async (withinSeconds) => {
      stopping = true;
      for (const timer of waiting) clearTimeout(timer);
      const children = [...running];
      const exits = children.map(
        (child) => new Promise<void>((settle) => child.once('exit', () => settle())),
      );
      for (const child of children) child.kill('SIGTERM');
      const late = setTimeout(() => {
        for (const child of running) child.kill('SIGKILL');
      }, withinSeconds * 1000);
      await Promise.all(exits);
      clearTimeout(late);
    },
  };
}
