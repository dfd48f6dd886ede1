import { spawn } from 'node:child_process';
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import path from 'node:path';
import { createInterface } from 'node:readline';

export interface RunningService {
  readonly url: string;
  readonly administratorToken: string;
  stop(): Promise<void>;
}

const PROGRAM = path.resolve(import.meta.dirname, '../../server/main.ts');

/** Starts the service on an embedded database in a new folder, at any free port of this machine. */
export async function startService(): Promise<RunningService> {
  const folder = mkdtempSync(path.join(tmpdir(), 'fairturn-demo-'));
  const child = spawn(process.execPath, [PROGRAM], {
    env: environment(folder),
    stdio: ['ignore', 'pipe', 'inherit'],
  });
  const ended = new Promise<void>((done) => child.once('close', () => done()));
  const stop = async (): Promise<void> => {
    child.kill('SIGTERM');
    await ended;
    rmSync(folder, { recursive: true, force: true });
  };
  let administratorToken = '';
  for await (const line of createInterface({ input: child.stdout })) {
    administratorToken ||= /^\s*(fairturn_\S+)\s*$/.exec(line)?.[1] ?? '';
    const url = /^Fairturn listens on (\S+)$/.exec(line)?.[1];
    if (url === undefined) continue;
    child.stdout.resume();
    return { url, administratorToken, stop };
  }
  await stop();
  throw new Error('The service ended before it listened.');
}

/** What the demo decides is not to be changed by what the caller's shell has set. */
function environment(folder: string): Record<string, string | undefined> {
  const inherited = Object.entries(process.env).filter(
    ([name]) => !name.startsWith('FAIRTURN_') && name !== 'DATABASE_URL',
  );
  return {
    ...Object.fromEntries(inherited),
    FAIRTURN_DATA_DIR: folder,
    FAIRTURN_PORT: '0',
    FAIRTURN_LOG_LEVEL: 'error',
    FAIRTURN_RATE_LIMIT: '0',
  };
}
