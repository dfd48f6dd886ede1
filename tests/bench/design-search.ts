// npm run bench:search [-- seeds]
//
// How near the search comes to the Williams efficiency (direct effects adjusted for carryover) from
// a random start, and after how many seconds: 98 % within 5 s for 4 to 8 conditions with as many
// sequences as the Williams square, 97 % within 30 s for 12 conditions, 12 periods, 24 sequences.
// Each search runs for its whole time; "reached" is when the target was first met. One core.
import { designEfficiency } from '#core/designs/efficiency.ts';
import { allPairs } from '#core/designs/search/criterion.ts';
import { searchDesign } from '#core/designs/search/search-design.ts';
import { williamsSquare } from '#core/designs/williams.ts';

interface Task {
  readonly conditions: number;
  readonly sequences: number;
  readonly target: number;
  readonly seconds: number;
}

const TASKS: readonly Task[] = [
  ...[4, 5, 6, 7, 8].map((conditions) => ({
    conditions,
    sequences: conditions % 2 === 0 ? conditions : 2 * conditions,
    target: 0.98,
    seconds: 5,
  })),
  { conditions: 12, sequences: 24, target: 0.97, seconds: 30 },
];

const seeds = Number(process.argv[2] ?? 1);

function adjusted(sequences: readonly (readonly number[])[], conditions: number): number {
  const { efficiency } = designEfficiency(sequences, conditions).directAdjusted;
  if (!efficiency.estimable) throw new Error(efficiency.detail);
  return efficiency.value;
}

function measure({ conditions, sequences, target, seconds }: Task, seed: number, once: boolean) {
  const square = adjusted(williamsSquare(conditions), conditions);
  const begin = performance.now();
  const elapsed = () => (performance.now() - begin) / 1000;
  let reached: number | null = null;
  const outcome = searchDesign(
    {
      conditionKeys: Array.from({ length: conditions }, (_, index) => `c${index}`),
      periods: conditions,
      sequenceCount: sequences,
      limits: once ? { constraints: [], timesMax: 1 } : { constraints: [] },
      criterion: { carryoverInModel: true, direct: allPairs(conditions), carryover: [] },
      seed: seed.toString(16).padStart(16, '0'),
      // A hundred thousand evaluations a report, and more of them than any machine has time for.
      evaluationsMax: 10_000_000,
    },
    {
      onProgress: (_, efficiency) => {
        if (efficiency >= target * square) reached ??= elapsed();
      },
      shouldStop: () => elapsed() >= seconds,
    },
  );
  if (!outcome.found) throw new Error(JSON.stringify(outcome.faults));
  const [start] = outcome.history;
  const ratio = adjusted(outcome.sequences, conditions) / square;
  return {
    design: `${conditions} × ${conditions} × ${sequences}`,
    recur: once ? 'never' : 'may',
    seed,
    start: ((start?.efficiency ?? 0) / square).toFixed(4),
    ratio: ratio.toFixed(4),
    target,
    met: ratio >= target ? 'yes' : 'NO',
    'reached by, s': reached === null ? (ratio >= target ? '(end)' : '-') : toTenths(reached),
    'run, s': toTenths(elapsed()),
    'evaluations/s': Math.round(outcome.evaluations / elapsed()),
    drift: outcome.largestDrift.toExponential(1),
  };
}

function toTenths(value: number): string {
  return value.toFixed(1);
}

const rows = [];
for (const task of TASKS) {
  for (let seed = 1; seed <= seeds; seed += 1) {
    for (const once of [true, false]) rows.push(measure(task, seed, once));
  }
}
console.table(rows);
