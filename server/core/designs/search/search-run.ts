import type { RandomStream } from '../../numerics/generator.ts';
import { idealVariance } from './criterion.ts';
import { exponentialDraw } from './exponential-draw.ts';
import {
  applyMove,
  emptyVisit,
  moveKeepsRules,
  type Visit,
  valueAfter,
  visitParticipant,
} from './moves.ts';
import { type MovingInformation, recomputeFromScratch } from './moving-information.ts';
import type {
  SearchControls,
  SearchCriterion,
  SearchRequest,
  SearchStep,
  SearchStop,
} from './search-types.ts';
import { shuffled } from './sequence-draw.ts';
import type { SequenceRules } from './sequence-rules.ts';

/** Moves after which everything is recomputed from scratch. */
const MOVES_BETWEEN_RECOMPUTATIONS = 500;

/** A fall of the criterion by this factor has eaten as much of the inverse's digits: recompute. */
const FALL_MAX = 100;

/** An improvement below this share is rounding. */
const GAIN_MIN = 1e-10;

/** A step of the history for each of this many parts of the budget. */
const REPORTS = 100;

/** A search under way: the design in motion, the best one met and the account of it all. */
export interface SearchRun {
  readonly moving: MovingInformation;
  readonly rules: SequenceRules;
  readonly criterion: SearchCriterion;
  readonly stream: RandomStream;
  readonly evaluationsMax: number;
  readonly controls: SearchControls;
  readonly visit: Visit;
  /** Every move a participant may be offered, three numbers each: see {@link moveList}. */
  readonly moves: Int32Array;
  readonly best: Int32Array;
  bestValue: number;
  evaluations: number;
  stoppedBy: SearchStop | null;
  readonly history: SearchStep[];
  movesSinceRecomputation: number;
  recomputations: number;
  largestDrift: number;
}

/** A run that stands at the sequences of `moving`. */
export function searchRun(
  request: SearchRequest,
  moving: MovingInformation,
  rules: SequenceRules,
  stream: RandomStream,
  controls: SearchControls,
): SearchRun {
  const run: SearchRun = {
    moving,
    rules,
    criterion: request.criterion,
    stream,
    evaluationsMax: request.evaluationsMax,
    controls,
    visit: emptyVisit(moving),
    moves: moveList(rules),
    best: Int32Array.from(moving.sequences),
    bestValue: moving.value,
    evaluations: 0,
    stoppedBy: null,
    history: [],
    movesSinceRecomputation: 0,
    recomputations: 0,
    largestDrift: 0,
  };
  run.history.push(bestStep(run));
  return run;
}

/**
 * Moves as [period, partner, next]: exchanges of two periods have next −1, replacements have
 * partner p. Where every participant meets every condition exactly as often as allowed there are
 * exchanges only.
 */
function moveList({ periods, conditionCount, timesMax }: SequenceRules): Int32Array {
  const moves: number[] = [];
  for (let period = 0; period < periods; period += 1) {
    for (let partner = period + 1; partner < periods; partner += 1) {
      moves.push(period, partner, -1);
    }
    if (timesMax * conditionCount === periods) continue;
    for (let next = 0; next < conditionCount; next += 1) moves.push(period, periods, next);
  }
  return Int32Array.from(moves);
}

/** The best so far, as the history and the progress callback tell it. */
export function bestStep(run: SearchRun): SearchStep {
  const { moving, best, bestValue, criterion, evaluations } = run;
  const replication = new Float64Array(moving.conditionCount);
  for (const condition of best) replication[condition]! += 1;
  for (const condition of moving.given.flat()) replication[condition]! += 1;
  const ideal = idealVariance(criterion, replication);
  const efficiency = Number.isFinite(ideal) ? ideal / bestValue : 0;
  return { evaluations, averageVariance: bestValue, efficiency };
}

/** Whether the search is to end: asked before each visit, and reporting progress. */
function isOver(run: SearchRun): boolean {
  if (run.stoppedBy !== null) return true;
  const used = run.evaluations / run.evaluationsMax;
  if (used < 1 && used >= run.history.length / REPORTS) {
    const step = bestStep(run);
    run.history.push(step);
    run.controls.onProgress?.(used, step.efficiency);
  }
  if (used >= 1) run.stoppedBy = 'budget';
  else if (run.controls.shouldStop?.() === true) run.stoppedBy = 'caller';
  return run.stoppedBy !== null;
}

/** Recomputes, and notes how far the updated criterion had drifted. */
export function recompute(run: SearchRun): void {
  const { moving } = run;
  const updated = moving.value;
  recomputeFromScratch(moving);
  run.recomputations += 1;
  run.movesSinceRecomputation = 0;
  run.largestDrift = Math.max(run.largestDrift, Math.abs(updated - moving.value) / moving.value);
}

/**
 * Puts other sequences in the place of the present ones. Computing everything anew counts as one
 * evaluation for each observation.
 */
export function moveTo(run: SearchRun, sequences: Int32Array): void {
  if (isOver(run)) return;
  run.evaluations += sequences.length;
  run.moving.sequences.set(sequences);
  recomputeFromScratch(run.moving);
  run.movesSinceRecomputation = 0;
  keepBest(run);
}

function keepBest(run: SearchRun): void {
  if (run.moving.value >= run.bestValue * (1 - GAIN_MIN)) return;
  run.bestValue = run.moving.value;
  run.best.set(run.moving.sequences);
}

function makeMove(run: SearchRun, period: number, partner: number, next: number): void {
  const before = run.moving.value;
  applyMove(run.visit, period, partner, next);
  run.movesSinceRecomputation += 1;
  const fell = !(run.moving.value > before / FALL_MAX);
  if (fell) {
    recomputeFromScratch(run.moving);
    run.movesSinceRecomputation = 0;
  } else if (run.movesSinceRecomputation >= MOVES_BETWEEN_RECOMPUTATIONS) recompute(run);
  keepBest(run);
}

/**
 * The criterion after move number `index` of the participant visited, or null when it changes
 * nothing or breaks a rule. Counts as an evaluation in any case, so that a budget always ends.
 */
function weigh(run: SearchRun, index: number): number | null {
  const { visit, rules, moves } = run;
  run.evaluations += 1;
  const period = moves[3 * index]!;
  const partner = moves[3 * index + 1]!;
  const next = nextOf(run, index);
  if (next === visit.sequence[period]) return null;
  if (!moveKeepsRules(visit.sequence, rules, period, partner, next)) return null;
  return valueAfter(visit, period, partner, next);
}

function nextOf({ visit, moves }: SearchRun, index: number): number {
  const next = moves[3 * index + 2]!;
  return next >= 0 ? next : visit.sequence[moves[3 * index + 1]!]!;
}

/**
 * Annealing: random participants are offered random moves; one that raises the criterion by a share
 * d of it is made with probability exp(−d/temperature). The temperature falls as a cube from
 * `hottest` to nothing.
 * Source: Kirkpatrick, Gelatt & Vecchi 1983, Science 220:671–680.
 */
export function anneal(run: SearchRun, hottest: number, evaluations: number): void {
  const { moving, visit, stream } = run;
  const begin = run.evaluations;
  const moveCount = run.moves.length / 3;
  if (moveCount === 0) return;
  const offers = Math.max(4, moving.periods);
  while (!isOver(run)) {
    const left = 1 - (run.evaluations - begin) / evaluations;
    if (left <= 0) return;
    const temperature = hottest * left * left * left;
    visitParticipant(visit, stream.nextBelow(moving.sequenceCount));
    for (let offer = 0; offer < offers; offer += 1) {
      const index = stream.nextBelow(moveCount);
      const value = weigh(run, index);
      if (value === null) continue;
      const rise = (value - moving.value) / moving.value;
      if (rise > 0 && !(rise < temperature * exponentialDraw(stream))) continue;
      makeMove(run, run.moves[3 * index]!, run.moves[3 * index + 1]!, nextOf(run, index));
      break;
    }
  }
}

/**
 * Exchange: each participant in turn takes the best of all moves, until none of them has a better
 * one. Ends at a design that no single move improves.
 */
export function exchange(run: SearchRun): void {
  const { moving, visit, moves, stream } = run;
  const everyone = Array.from({ length: moving.sequenceCount }, (_, index) => index);
  for (let improved = true; improved; ) {
    improved = false;
    for (const participant of shuffled(everyone, stream)) {
      if (isOver(run)) return;
      visitParticipant(visit, participant);
      let bestIndex = -1;
      let bestValue = moving.value * (1 - GAIN_MIN);
      for (let index = 0; 3 * index < moves.length; index += 1) {
        const value = weigh(run, index);
        if (value === null || value >= bestValue) continue;
        bestIndex = index;
        bestValue = value;
      }
      if (bestIndex < 0) continue;
      makeMove(run, moves[3 * bestIndex]!, moves[3 * bestIndex + 1]!, nextOf(run, bestIndex));
      improved = true;
    }
  }
}
