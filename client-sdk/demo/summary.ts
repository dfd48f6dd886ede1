import {
  LINERS,
  type LinerTruth,
  linerOf,
  meanComfort,
  meanMisseated,
  PER_PERIOD,
} from './truth.ts';

// The parts of a report's body that the summary reads.

interface Interval {
  readonly lower: number;
  readonly upper: number;
}

type Estimable<Value> = ({ readonly estimable: true } & Value) | NotEstimable;

interface NotEstimable {
  readonly estimable: false;
  readonly reason: string;
}

type Comparison = { readonly first: string; readonly second: string } & Estimable<{
  readonly estimate: number;
  readonly interval: Estimable<Interval>;
  readonly ratio: Estimable<{ readonly ratio: number; readonly interval: Interval }> | null;
}>;

interface MeasureResult {
  readonly measure: string;
  readonly method: {
    readonly comparisonSets: readonly {
      readonly use: 'primary' | 'sensitivity';
      readonly comparisons: readonly Comparison[];
    }[];
  } | null;
  readonly order: {
    readonly fit: Estimable<{
      readonly conditionMeans: readonly ({ readonly condition: string } & Estimable<{
        readonly mean: number;
        readonly interval: Interval;
      }>)[];
      readonly linearTrend: Estimable<{ readonly estimate: number; readonly interval: Interval }>;
    }>;
  };
}

export interface ReportedBody {
  readonly looks: readonly unknown[];
  readonly result: { readonly measures: readonly MeasureResult[] };
}

/** One line: what the report says beside what is true. */
export interface SummaryLine {
  readonly what: string;
  readonly estimate: number;
  readonly interval: Interval;
  readonly truth: number;
}

/** Everything in the report for which the simulation knows the truth. */
export function summaryLines(body: ReportedBody): SummaryLine[] {
  return [
    ...comparisonLines(body, 'pegboard-time', 'pegboard time, ratio', timeRatio),
    trendLine(body),
    ...comparisonLines(body, 'pegs-dropped', 'pegs dropped, difference', pegsDifference),
    ...meanLines(body, 'part-misseated', 'part mis-seated, share', meanMisseated),
    ...meanLines(body, 'hand-comfort', 'hand comfort, mean rating', meanComfort),
  ];
}

function timeRatio(first: LinerTruth, second: LinerTruth): number {
  return first.timeRatio / second.timeRatio;
}

function pegsDifference(first: LinerTruth, second: LinerTruth): number {
  return first.pegsDropped - second.pegsDropped;
}

function comparisonLines(
  body: ReportedBody,
  measure: string,
  what: string,
  truth: (first: LinerTruth, second: LinerTruth) => number,
): SummaryLine[] {
  const sets = resultOf(body, measure).method?.comparisonSets ?? [];
  const primary = sets.find(({ use }) => use === 'primary')?.comparisons ?? [];
  return primary.map((comparison) => {
    const { first, second } = comparison;
    const given = estimated(comparison, `${first} against ${second}`);
    const ratio = given.ratio === null ? null : estimated(given.ratio, what);
    return {
      what: `${what}: ${linerOf(first).label} against ${linerOf(second).label}`,
      estimate: ratio?.ratio ?? given.estimate,
      interval: ratio?.interval ?? estimated(given.interval, what),
      truth: truth(linerOf(first), linerOf(second)),
    };
  });
}

/** Hands cool: the factor on the pegboard time from each period to the next. */
function trendLine(body: ReportedBody): SummaryLine {
  const fit = estimated(resultOf(body, 'pegboard-time').order.fit, 'order');
  const { estimate, interval } = estimated(fit.linearTrend, 'trend over periods');
  return {
    what: 'pegboard time, ratio: each period to the one before',
    estimate: Math.exp(estimate),
    interval: { lower: Math.exp(interval.lower), upper: Math.exp(interval.upper) },
    truth: Math.exp(PER_PERIOD.logTime),
  };
}

function meanLines(
  body: ReportedBody,
  measure: string,
  what: string,
  truth: (liner: LinerTruth) => number,
): SummaryLine[] {
  const fit = estimated(resultOf(body, measure).order.fit, measure);
  return LINERS.map((liner) => {
    const found = fit.conditionMeans.find(({ condition }) => condition === liner.key);
    if (found === undefined) throw new Error(`The report has no mean for ${liner.key}.`);
    const { mean, interval } = estimated(found, `${measure}, ${liner.key}`);
    return { what: `${what}: ${liner.label}`, estimate: mean, interval, truth: truth(liner) };
  });
}

function resultOf(body: ReportedBody, measure: string): MeasureResult {
  const found = body.result.measures.find((one) => one.measure === measure);
  if (found === undefined) throw new Error(`The report has no result for ${measure}.`);
  return found;
}

function estimated<Value>(
  value: Estimable<Value>,
  what: string,
): { readonly estimable: true } & Value {
  if (value.estimable) return value;
  throw new Error(`The report could not estimate this: ${what} (${value.reason}).`);
}

/** The lines as a table for a terminal. */
export function summaryTable(lines: readonly SummaryLine[]): string {
  const rows = lines.map(({ what, estimate, interval, truth }) => [
    what,
    estimate.toFixed(3),
    `${interval.lower.toFixed(3)} to ${interval.upper.toFixed(3)}`,
    truth.toFixed(3),
    isCovered(interval, truth) ? 'yes' : 'no',
  ]);
  const head = ['', 'estimate', '95% interval', 'truth', 'covered'];
  const widths = head.map((title, column) =>
    Math.max(title.length, ...rows.map((row) => (row[column] ?? '').length)),
  );
  return [head, ...rows]
    .map((row) =>
      row
        .map((cell, column) =>
          column === 0 ? cell.padEnd(widths[column] ?? 0) : cell.padStart(widths[column] ?? 0),
        )
        .join('  '),
    )
    .join('\n');
}

export function isCovered(interval: Interval, truth: number): boolean {
  return interval.lower <= truth && truth <= interval.upper;
}
