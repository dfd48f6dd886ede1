import { assert } from '../../errors.ts';
import { randomStream } from '../../numerics/generator.ts';
import { efficiencyOf } from '../efficiency.ts';
import { designInformation } from '../information.ts';
import { unreachedFault } from './check-estimability.ts';
import { searchFaults } from './check-search.ts';
import { criterionValue, idealVariance, weightMatrix } from './criterion.ts';
import { movingInformation } from './moving-information.ts';
import {
  anneal,
  bestStep,
  exchange,
  moveTo,
  recompute,
  type SearchRun,
  searchRun,
} from './search-run.ts';
import type { SearchControls, SearchOutcome, SearchRequest } from './search-types.ts';
import { sequenceDrawer } from './sequence-draw.ts';
import { sequenceRules } from './sequence-rules.ts';
import { type Starts, startsOf } from './starts.ts';

/**
 * Temperature at the beginning of a cycle, as a share of the criterion, times the number of
 * observations: one change alters a share of the criterion that falls with their number.
 */
const HOTTEST_TIMES_OBSERVATIONS = 0.2;

/**
 * Evaluations of a cycle for each move that the whole design has; as many again go into choosing a
 * developed design to begin with.
 */
const CYCLE_LENGTH = 80;

/** A cycle takes at most this share of the budget, so that a small one still has several. */
const CYCLE_SHARE_MAX = 1 / 8;

const SEARCH_STREAM = 0;

/**
 * Searches for sequences that minimise the weighted average variance of the differences that
 * matter, in the model with participants and periods fixed.
 *
 * Cycles of annealing, each followed by exchange until no single change is better. They go on in
 * turn from the best of some cyclically developed designs, from the best so far, from drawn
 * sequences and from the best so far again, until the budget is used. The result is the best
 * design met; it is never worse than the start, which does not mean that there is no better one.
 * Sources: Kirkpatrick, Gelatt & Vecchi 1983, Science 220:671–680 (annealing); Jones & Donev 1996,
 * Statistics in Medicine 15:1435–1446 (exchange for cross-over designs).
 *
 * Equal requests give equal results on every machine, unless the caller stops them.
 *
 * @returns the sequences and what they are worth, or the faults that keep them from being found;
 *   bad requests are answered, not thrown
 */
export function searchDesign(request: SearchRequest, controls: SearchControls = {}): SearchOutcome {
  const faults = searchFaults(request);
  if (faults.length > 0) return { found: false, faults };
  const { conditionKeys, periods, sequenceCount, criterion, given = [] } = request;
  const rules = sequenceRules(request.limits, conditionKeys, periods);
  const stream = randomStream(request.seed, SEARCH_STREAM);
  const starts = startsOf(rules, sequenceCount, sequenceDrawer(rules), stream);
  const moving = movingInformation(
    conditionKeys.length,
    periods,
    request.start === undefined ? starts.drawn() : Int32Array.from(request.start.flat()),
    given,
    weightMatrix(criterion, conditionKeys.length),
  );
  const run = searchRun(request, moving, rules, stream, controls);
  const hottest = HOTTEST_TIMES_OBSERVATIONS / (sequenceCount * periods);
  const evaluations = Math.min(
    (CYCLE_LENGTH * sequenceCount * run.moves.length) / 3,
    CYCLE_SHARE_MAX * request.evaluationsMax,
  );
  exchange(run);
  for (let cycle = 0; run.stoppedBy === null; cycle += 1) {
    if (cycle % 4 === 0) moveToBestDeveloped(run, starts, run.evaluations + evaluations);
    else if (cycle % 4 === 2) moveTo(run, starts.drawn());
    else moveTo(run, run.best);
    anneal(run, hottest, evaluations);
    recompute(run);
    exchange(run);
  }
  return outcomeOf(request, run);
}

/** Goes on from the best of as many cyclically developed designs as the evaluations can judge. */
function moveToBestDeveloped(run: SearchRun, starts: Starts, evaluationsEnd: number): void {
  let best = starts.developed();
  moveTo(run, best);
  let bestValue = run.moving.value;
  while (run.evaluations < evaluationsEnd && run.stoppedBy === null) {
    const developed = starts.developed();
    moveTo(run, developed);
    if (run.moving.value >= bestValue) continue;
    best = developed;
    bestValue = run.moving.value;
  }
  moveTo(run, best);
}

/** The best design of a run that has ended, judged from its sequences alone. */
function outcomeOf(request: SearchRequest, run: SearchRun): SearchOutcome {
  const { conditionKeys, periods, criterion, given = [] } = request;
  const sequences = Array.from({ length: request.sequenceCount }, (_, row) =>
    Array.from(run.best.subarray(row * periods, (row + 1) * periods)),
  );
  const information = designInformation([...given, ...sequences], conditionKeys.length);
  const { averageVariance, missing } = criterionValue(information, criterion);
  if (averageVariance === null) {
    return { found: false, faults: [unreachedFault(request, missing)] };
  }
  const { history, stoppedBy, evaluations, recomputations, largestDrift } = run;
  assert(stoppedBy !== null, 'a run that has ended says why');
  return {
    found: true,
    sequences,
    efficiencies: efficiencyOf(information),
    averageVariance,
    efficiency: idealVariance(criterion, information.replication) / averageVariance,
    history: [...history, bestStep(run)],
    stoppedBy,
    evaluations,
    recomputations,
    largestDrift,
  };
}
