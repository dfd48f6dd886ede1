import { type ChildProcess, spawn } from 'node:child_process';
import { createInterface } from 'node:readline';
import { setTimeout as pause } from 'node:timers/promises';
import { afterAll } from 'vitest';

export interface NodeProgram {
  readonly child: ChildProcess;
  readonly pid: number;
  /** Everything printed so far on either stream. */
  output(): string;
  /** The first line on standard output that matches; rejects when the program ends before it. */
  line(pattern: RegExp): Promise<string>;
  /** Exit code, or the signal's name. */
  readonly ended: Promise<number | NodeJS.Signals>;
}

const STOP_MS_MAX = 20_000;
const started: NodeProgram[] = [];

// Importing this module ends what the importing test file left running because a test failed:
// first politely, so that a service stops its database too.
afterAll(async () => {
  for (const program of started) {
    program.child.kill('SIGTERM');
    await Promise.race([program.ended, pause(STOP_MS_MAX, undefined, { ref: false })]);
    program.child.kill('SIGKILL');
  }
});

/** Starts a program under the Node that runs the tests, with only the given environment. */
export function startNodeProgram(
  program: string,
  options: { args?: string[]; environment?: Record<string, string> } = {},
): NodeProgram {
  const child = spawn(process.execPath, [program, ...(options.args ?? [])], {
    env: { PATH: process.env.PATH, ...options.environment },
    stdio: ['ignore', 'pipe', 'pipe'],
  });
  if (child.pid === undefined) throw new Error(`${program} could not be started.`);
  const lines: string[] = [];
  const waiting = new Set<() => void>();
  createInterface({ input: child.stdout }).on('line', (line) => {
    lines.push(line);
    for (const look of waiting) look();
  });
  let output = '';
  child.stdout.on('data', (chunk: Buffer) => {
    output += chunk.toString();
  });
  child.stderr.on('data', (chunk: Buffer) => {
    output += chunk.toString();
  });
  const ended = new Promise<number | NodeJS.Signals>((settle) => {
    child.once('close', (code, signal) => settle(signal ?? code ?? -1));
  });
  const running: NodeProgram = {
    child,
    pid: child.pid,
    output: () => output,
    ended,
    line: (pattern) =>
      new Promise((settle, fail) => {
        const look = () => {
          const found = lines.find((line) => pattern.test(line));
          if (found === undefined) return;
          waiting.delete(look);
          settle(found);
        };
        waiting.add(look);
        look();
        void ended.then((how) => fail(new Error(`${program} ended (${how}) first:\n${output}`)));
      }),
  };
  started.push(running);
  return running;
}
