import { assert } from '../../errors.ts';
import { randomStream } from '../../numerics/generator.ts';
import { designInformation } from '../information.ts';
import { type CriterionValue, criterionValue } from './criterion.ts';
import type { SearchFault, SearchRequest, WeightedPair } from './search-types.ts';
import { conflictingConstraints, sequenceDrawer } from './sequence-draw.ts';
import { constraintInWords, sequenceRules } from './sequence-rules.ts';

/** The checks draw from a stream of their own, so that they alter nothing about the search. */
const CHECK_STREAM = 1;

/** Sequences drawn to see what any could tell: as many for a condition, and at least so many. */
const SAMPLE_PER_CONDITION = 40;
const SAMPLE_MIN = 200;

/** Whether any sequence keeps the limits, and if none does, which limits are to blame. */
export function fillingFaults({
  conditionKeys,
  periods,
  limits,
  seed,
}: SearchRequest): SearchFault[] {
  const stream = randomStream(seed, CHECK_STREAM);
  const { timesMax } = limits;
  if (timesMax !== undefined && timesMax * conditionKeys.length < periods) {
    const most = timesMax * conditionKeys.length;
    const message =
      `${conditionKeys.length} conditions, each at most ${timesMax} times for a participant, ` +
      `cannot fill ${periods} periods`;
    const times = Math.ceil(periods / conditionKeys.length);
    const remedy = `Plan at most ${most} periods, or let a condition recur ${times} times`;
    return [{ code: 'more-periods-than-can-be-filled', message, remedy }];
  }
  const draw = sequenceDrawer(sequenceRules(limits, conditionKeys, periods)).draw(stream, false);
  if (draw === 'undecided') {
    const message = 'No sequence that keeps the constraints was found, nor shown not to exist';
    const remedy = 'Leave out some constraints, or give fewer conditions or periods';
    return [{ code: 'filling-undecided', message, remedy }];
  }
  if (draw !== 'impossible') return [];
  const conflict = conflictingConstraints(limits, conditionKeys, periods, stream);
  const named = conflict.map(constraintInWords).join('; ');
  const under =
    timesMax === undefined ? '' : `, with each condition at most ${timesMax} times a participant`;
  return [
    {
      code: 'contradictory-constraints',
      message: `No sequence of ${periods} periods keeps these together${under}: ${named}`,
      remedy:
        conflict.length === 1
          ? 'Leave this constraint out, or change it'
          : 'Leave one of these constraints out, or change it',
    },
  ];
}

/** Too few sequences by counting, or comparisons that no sequences under the limits can make. */
export function estimabilityFaults(request: SearchRequest): SearchFault[] {
  const { periods, sequenceCount, given = [], criterion, conditionKeys } = request;
  const sample = sampled(request);
  const { missing } = valueWith(request, sample);
  if (missing.length > 0) {
    const message =
      `Of ${sample.length} random sequences that keep the constraints, all together do not ` +
      `determine ${comparisons(missing, conditionKeys)}`;
    const remedy =
      'Let conditions recur, plan more periods, leave out constraints, give these comparisons no ' +
      'weight, or leave carryover out of the model';
    return [{ code: 'comparisons-not-estimable', message, remedy }];
  }
  if (periods === 1) return []; // What is given determines all: one period more tells nothing.
  // A participant tells p − 1 differences; the differences of periods use p − 1 of all of them.
  const needed = treeSize(criterion.direct) + treeSize(criterion.carryover);
  const known = given.reduce((sum, { length }) => sum + Math.max(0, length - 1), 0);
  const least = 1 + Math.ceil((needed - known) / (periods - 1));
  if (sequenceCount >= least) return [];
  const message =
    `${sequenceCount} sequences of ${periods} periods cannot determine ${needed} independent ` +
    'differences beside those of the periods';
  const remedy =
    `At least ${least} sequences are needed; ${sufficientCount(request, sample)} drawn at random ` +
    'suffice';
  return [{ code: 'too-few-sequences', message, remedy }];
}

/** That the best design found leaves comparisons undetermined. */
export function unreachedFault(
  request: SearchRequest,
  missing: CriterionValue['missing'],
): SearchFault {
  const sufficient = sufficientCount(request, sampled(request));
  return {
    code: 'comparisons-not-reached',
    message:
      `The best ${request.sequenceCount} sequences found do not determine ` +
      comparisons(missing, request.conditionKeys),
    remedy:
      sufficient > request.sequenceCount
        ? `Plan more sequences, of which ${sufficient} suffice, or weigh fewer comparisons`
        : 'Allow more evaluations',
  };
}

/** Random sequences that keep the limits, any of which can come out. */
function sampled({ conditionKeys, periods, limits, seed }: SearchRequest): number[][] {
  const stream = randomStream(seed, CHECK_STREAM);
  const drawer = sequenceDrawer(sequenceRules(limits, conditionKeys, periods));
  const size = Math.max(SAMPLE_MIN, SAMPLE_PER_CONDITION * conditionKeys.length);
  return Array.from({ length: size }, () => {
    const drawn = drawer.draw(stream, true);
    return typeof drawn === 'string' ? [] : Array.from(drawn);
  });
}

function valueWith(
  { given = [], conditionKeys, criterion }: SearchRequest,
  sequences: readonly (readonly number[])[],
): CriterionValue {
  const information = designInformation([...given, ...sequences], conditionKeys.length);
  return criterionValue(information, criterion);
}

/** How many of the sample, from its beginning, determine every weighted comparison. */
function sufficientCount(request: SearchRequest, sample: readonly number[][]): number {
  let tooFew = 0;
  let enough = sample.length;
  while (enough - tooFew > 1) {
    const middle = Math.floor((tooFew + enough) / 2);
    const { missing } = valueWith(request, sample.slice(0, middle));
    if (missing.length === 0) enough = middle;
    else tooFew = middle;
  }
  return enough;
}

/** How many independent differences the weighted pairs span: edges of a spanning forest. */
function treeSize(pairs: readonly WeightedPair[]): number {
  const groupOf = new Map<number, number>();
  let edges = 0;
  for (const { first, second, weight } of pairs) {
    const one = groupOf.get(first) ?? first;
    const other = groupOf.get(second) ?? second;
    groupOf.set(first, one).set(second, other);
    if (weight === 0 || one === other) continue;
    edges += 1;
    for (const [condition, group] of groupOf) if (group === other) groupOf.set(condition, one);
  }
  return edges;
}

/** The first of the comparisons in words, and how many more there are. */
function comparisons(missing: CriterionValue['missing'], conditionKeys: readonly string[]): string {
  const [named] = missing;
  assert(named !== undefined, 'some comparison is missing');
  const { first, second, carryover } = named;
  const kind = carryover ? 'the carryover of ' : '';
  const pair = `${kind}"${conditionKeys[first]}" against "${conditionKeys[second]}"`;
  if (missing.length === 1) return pair;
  const more = missing.length - 1;
  return `${pair} and ${more} more comparison${more === 1 ? '' : 's'}`;
}
