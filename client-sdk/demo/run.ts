// The whole job in one go, on invented data: a service, three sites with two stations each, 48
// participants, the registered analysis, and its report beside the truth behind the simulation.
import { fork } from 'node:child_process';
import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import path from 'node:path';
import type { Report } from '@fairturn/client';
import { newSeed, type Scenario, setUp } from './scenario.ts';
import { type RunningService, startService } from './service-process.ts';
import type { StationNews, StationOrders } from './station.ts';
import { isCovered, type ReportedBody, summaryLines, summaryTable } from './summary.ts';

const OUTPUT = path.resolve(import.meta.dirname, '../../demo-output');
const STATION = path.join(import.meta.dirname, 'station.ts');

const begun = performance.now();
const stations = new Set<ReturnType<typeof fork>>();

function say(text: string): void {
  const seconds = ((performance.now() - begun) / 1000).toFixed(1).padStart(5);
  process.stdout.write(`${seconds} s  ${text}\n`);
}

await main();

async function main(): Promise<void> {
  const folder = mkdtempSync(path.join(tmpdir(), 'fairturn-stations-'));
  let service: RunningService | undefined;
  const cleanUp = async (): Promise<void> => {
    for (const station of stations) station.kill();
    await service?.stop();
    rmSync(folder, { recursive: true, force: true });
  };
  process.once('SIGINT', () => void cleanUp().then(() => process.exit(130)));
  try {
    say('All data of this demo are invented; no participant exists.');
    service = await startService();
    say(`The service listens on ${service.url}, on an embedded database of its own`);
    await wholeJob(service, folder);
  } finally {
    await cleanUp();
  }
  const shown = path.relative(process.cwd(), OUTPUT);
  process.stdout.write(
    `\nThe report: ${path.join(shown, 'report.html')} to read, ` +
      `${path.join(shown, 'report.json')} as it was hashed\n`,
  );
}

async function wholeJob(service: RunningService, folder: string): Promise<void> {
  const seed = process.argv[2] ?? newSeed();
  const scenario = await setUp({ ...service, folder, seed });
  const { study, lead, auditor } = scenario;
  const version = await study.version(1);
  say(`Registered: protocol version 1, SHA-256 ${version.sha256.slice(0, 16)}…`);
  say(`Six stations at three sites begin (seed of the simulation: ${seed})`);
  const done = await Promise.all(scenario.stations.map(runStation));
  const arrived = done.reduce((sum, counts) => sum + counts.arrived, 0);
  const completed = done.reduce((sum, counts) => sum + counts.completed, 0);
  say(`${arrived} participants arrived, ${completed} completed every period`);
  await showBalance(scenario);
  const checkpoint = await auditor.audit.checkpoint();
  mkdirSync(OUTPUT, { recursive: true });
  writeFileSync(path.join(OUTPUT, 'checkpoint.json'), JSON.stringify(checkpoint, null, 2));
  await study.close({ reason: 'All participants of the plan have taken part.' });
  const analysis = await study.analyse();
  let stage = '';
  const report = await analysis.report({
    onProgress: (news) => {
      if (news.stage !== stage)
        say(`Analysis ${(news.progress * 100).toFixed(0)} %: ${news.stage}`);
      stage = news.stage;
    },
  });
  await writeReport(report);
  const again = await report.recompute();
  if (!again.same || !again.pageSame) throw new Error('The report computed again is another.');
  say('The report computed again has the same bytes');
  const replay = await lead.study(study.id).replayAllocations();
  if (!replay.agrees) throw new Error('The replay of the allocations disagrees.');
  say(`All ${replay.verified} slots, replayed from the revealed secret, agree`);
  const verification = await auditor.audit.verify(checkpoint);
  if (!verification.intact) throw new Error(JSON.stringify(verification.faults));
  const entries = verification.chains.reduce((sum, chain) => sum + chain.entries, 0);
  say(`The audit chains verify against the checkpoint: ${entries} entries`);
}

/** Runs one station as a process of its own, until it is done. */
function runStation(orders: StationOrders): Promise<{ arrived: number; completed: number }> {
  return new Promise((resolve, reject) => {
    const station = fork(STATION);
    stations.add(station);
    let finished: StationNews['finished'];
    station.on('message', (news: StationNews) => {
      finished ??= news.finished;
      if (news.finished === undefined) say(`${news.station}: ${news.text}`);
    });
    station.on('exit', (code) => {
      stations.delete(station);
      if (finished !== undefined && code === 0) resolve(finished);
      else reject(new Error(`Station ${orders.name} ended with ${code}.`));
    });
    station.send(orders);
  });
}

async function showBalance({ study, siteNames }: Scenario): Promise<void> {
  const { sites } = await study.balance();
  for (const { siteId, planned, completed } of sites) {
    const name = siteNames.get(siteId) ?? siteId;
    say(`${name}: slots by sequence ${planned.join(' ')}, completed ${completed.join(' ')}`);
  }
}

async function writeReport(report: Report): Promise<void> {
  const body = await report.body();
  writeFileSync(path.join(OUTPUT, 'report.json'), body);
  writeFileSync(path.join(OUTPUT, 'report.html'), await report.html());
  const { number, sha256 } = await report.details();
  say(`Report ${number} is filed, SHA-256 ${sha256.slice(0, 16)}…`);
  const parsed: ReportedBody = JSON.parse(new TextDecoder().decode(body));
  const lines = summaryLines(parsed);
  const covered = lines.filter(({ interval, truth }) => isCovered(interval, truth)).length;
  process.stdout.write(
    `\n${summaryTable(lines)}\n\n${covered} of ${lines.length} intervals cover the simulated ` +
      'truth; of 95% intervals, one in twenty does not.\n\n',
  );
}
