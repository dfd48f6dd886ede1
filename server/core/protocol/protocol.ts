/**
 * The shape of a protocol document, as plain types, so that the core can check, hand out and
 * analyse without knowing HTTP. The zod schema in `server/studies/schemas.ts` parses incoming JSON
 * into exactly this type; a compile-time check there fails when the two drift apart.
 *
 * Keys (`key`, `measure`, condition keys…) match {@link KEY_PATTERN}. A condition is one cell of
 * the within factors; its key is the level keys in factor order joined by a full stop.
 */
export interface Protocol {
  readonly title: string;
  readonly rationale: string;
  readonly hypotheses: readonly Hypothesis[];
  readonly withinFactors: readonly Factor[];
  readonly betweenFactors: readonly Factor[];
  readonly scheme: SchemeChoice;
  readonly policy: PolicyChoice;
  readonly replacement: ReplacementRule;
  readonly periods: PeriodPlan;
  readonly sites: readonly SiteTarget[];
  readonly measures: readonly Measure[];
  readonly exclusions: readonly ExclusionRule[];
  readonly analysis: AnalysisPlan;
}

export interface Hypothesis {
  readonly key: string;
  readonly statement: string;
}

export interface Factor {
  readonly key: string;
  readonly label: string;
  readonly levels: readonly Level[];
}

export interface Level {
  readonly key: string;
  readonly label: string;
}

/** The counterbalancing scheme the sequences come from. A custom list names condition keys. */
export type SchemeChoice =
  | { readonly kind: BaseScheme }
  /** Each sequence of the base followed by its mirror image: twice as many periods. */
  | { readonly kind: 'mirrored'; readonly base: BaseScheme }
  /** Each sequence of the base with its last condition once more: strongly balanced. */
  | { readonly kind: 'extra-period'; readonly base: CarryoverBalancedScheme }
  | { readonly kind: 'two-conditions'; readonly design: TwoConditionDesign }
  /** Fewer periods than conditions; every two conditions meet in equally many sequences. */
  | { readonly kind: 'balanced-incomplete-blocks'; readonly carryoverBalanced: boolean }
  /** Some squares of the complete permutations: more orders than Williams, as well balanced. */
  | { readonly kind: 'permutation-fraction'; readonly squares: number }
  /** Every order of the conditions that meets the constraints. */
  | {
      readonly kind: 'constrained-permutations';
      readonly constraints: readonly OrderConstraint[];
    }
  | RandomPermutations
  | NestedScheme
  | { readonly kind: 'custom-list'; readonly sequences: readonly (readonly string[])[] };

/** Schemes in which every sequence presents every condition once. */
export type BaseScheme = CarryoverBalancedScheme | 'cyclic-latin-square';

/** Schemes in which every ordered pair of different conditions is adjacent equally often. */
export type CarryoverBalancedScheme =
  | 'complete-permutations'
  | 'williams'
  | 'orthogonal-latin-squares';

/**
 * Orders drawn at random, each independently of the others. The seed is registered, so that the
 * protocol fixes the list, and with it the generator by which the list is drawn again.
 */
export interface RandomPermutations {
  readonly kind: 'random-permutations';
  /** How many orders are drawn. */
  readonly count: number;
  /** 16 lower-case hexadecimal digits. */
  readonly seed: string;
  readonly generator: { readonly name: string; readonly version: number };
}

/**
 * Nested counterbalancing: the levels of one within factor are run in blocks, in counterbalanced
 * order; inside the blocks the conditions that differ in the other factors are counterbalanced.
 */
export interface NestedScheme {
  readonly kind: 'nested';
  /** Place of the factor that is run in blocks among the within factors, from 1. */
  readonly blockedFactor: number;
  /** Orders of the blocks. */
  readonly blocks: BaseScheme;
  /** Orders inside a block. */
  readonly insideBlocks: BaseScheme;
}

/**
 * What an order must not do. Conditions are keys, periods are counted from 1.
 * - `never-in-periods`: the condition stands in none of these periods;
 * - `always-in-periods`: the condition stands in these periods alone;
 * - `never-adjacent`: neither condition immediately after the other;
 * - `never-in-order`: `second` never immediately after `first`;
 * - `familiarisation-first`: the condition stands in period 1, and in no other.
 */
export type OrderConstraint =
  | {
      readonly kind: 'never-in-periods' | 'always-in-periods';
      readonly condition: string;
      readonly periods: readonly number[];
    }
  | {
      readonly kind: 'never-adjacent' | 'never-in-order';
      readonly first: string;
      readonly second: string;
    }
  | { readonly kind: 'familiarisation-first'; readonly condition: string };

/** No scheme has more sequences than this, which is 7!, the largest complete set of orders. */
export const SEQUENCES_MAX = 5040;

/** Designs for two conditions, named by their sequences; a is the protocol's first condition. */
export const TWO_CONDITION_DESIGNS = [
  'ab-ba',
  'aa-bb-ab-ba',
  'abb-baa',
  'aba-bab',
  'aab-bba',
  'abb-baa-aba-bab',
  'abb-baa-aab-bba',
  'aab-bba-aba-bab',
  'abab-baba',
  'aabb-bbaa',
  'abba-baab',
  'aabb-bbaa-abba-baab',
] as const;

export type TwoConditionDesign = (typeof TWO_CONDITION_DESIGNS)[number];

/** The rule by which sequences of the scheme are handed out. */
export type PolicyChoice =
  | { readonly kind: 'balanced' }
  /** Blocks that hold every sequence equally often: one of the multiples, drawn for each block. */
  | { readonly kind: 'permuted-blocks'; readonly multiples: readonly number[] }
  | Minimisation;

/** Margins are kept even, site, between factors and study, each by its weight; cells are not. */
export interface Minimisation {
  readonly kind: 'minimisation';
  /** How the imbalance of one margin is measured. */
  readonly imbalance: 'variance' | 'range';
  /** Whole numbers from 0; every between factor has one. */
  readonly weights: {
    readonly site: number;
    readonly study: number;
    readonly factors: readonly { readonly factor: string; readonly weight: number }[];
  };
  /** How likely the sequence that leaves the least imbalance is taken: above 0.5, at most 1. */
  readonly bestProbability: number;
}

/** Who takes a vacated slot: the next arrival of the same site and stratum, or nobody. */
export type ReplacementRule = { readonly kind: 'same-site' } | { readonly kind: 'none' };

export interface PeriodPlan {
  /** Number of periods in every sequence. */
  readonly count: number;
  /** Trials of one participant in one period. */
  readonly repetitions: number;
  /** Period numbers (from 1) by visit: `[[1, 2], [3, 4]]` is two visits of two periods. */
  readonly visits: readonly (readonly number[])[];
  /** Rest between consecutive periods, ISO 8601 durations, from the start of one to the next. */
  readonly washout: { readonly minimum: string; readonly maximum: string | null };
}

export interface SiteTarget {
  readonly siteId: string;
  /** Slots at this site: how many participants it may enrol, replacements not counted. */
  readonly targetEnrolment: number;
}

export type Scale = 'continuous' | 'time-like' | 'count' | 'binary' | 'ordinal';

export interface Measure {
  readonly key: string;
  readonly label: string;
  readonly unit: string | null;
  readonly scale: Scale;
  readonly direction: 'lower-is-better' | 'higher-is-better' | 'neither';
  readonly taken: 'each-trial' | 'once-a-period';
  /** Values outside are implausible: stored and flagged, never refused. Null ends are open. */
  readonly validRange: { readonly minimum: number | null; readonly maximum: number | null } | null;
  /** Decimal places in reports. */
  readonly decimals: number;
  /** Ordinal measures only: the points of the rating, ascending. */
  readonly points: readonly { readonly value: number; readonly label: string }[] | null;
  /** Counts only: what the count is out of or over, a constant or another measure of the trial. */
  readonly exposure: Exposure | null;
}

export type Exposure =
  | { readonly kind: 'constant'; readonly value: number; readonly unit: string }
  | { readonly kind: 'measure'; readonly measure: string };

/**
 * Exclusion rules, applied in the order given, before anything is estimated:
 * - `range`: a value outside [minimum, maximum] is left out;
 * - `time-out`: a value at or above the limit is left out;
 * - `incomplete-participant`: all values of a participant with fewer completed periods are left
 *   out.
 */
export type ExclusionRule =
  | {
      readonly kind: 'range';
      readonly measure: string;
      readonly minimum: number | null;
      readonly maximum: number | null;
    }
  | { readonly kind: 'time-out'; readonly measure: string; readonly limit: number }
  | { readonly kind: 'incomplete-participant'; readonly minimumPeriods: number };

export interface AnalysisPlan {
  readonly measures: readonly MeasurePlan[];
}

export interface MeasurePlan {
  readonly measure: string;
  readonly role: 'primary' | 'secondary';
  readonly method: AnalysisMethod;
  /** The one primary estimate of the condition comparisons; the other stands beside it. */
  readonly primaryEstimate: 'adjusted-for-period' | 'unadjusted';
  readonly contrasts: ContrastChoice;
  readonly multiplicity: 'holm' | 'bonferroni' | 'none';
  readonly alpha: number;
  /**
   * Equivalence margin in the unit of the measure (for time-like measures: a ratio of geometric
   * means, lower < 1 < upper). Null when equivalence is not claimed.
   */
  readonly equivalence: { readonly lower: number; readonly upper: number } | null;
}

/** Methods of analysis; each has one room in the core, and other methods join this union. */
export type AnalysisMethod = 'repeated-measures-anova' | 'friedman';

export type ContrastChoice =
  | { readonly kind: 'all-pairs' }
  | { readonly kind: 'against-reference'; readonly reference: string };

/** Keys are lower-case words joined by hyphens, at most 40 characters, beginning with a letter. */
export const KEY_PATTERN = /^[a-z][a-z0-9]*(?:-[a-z0-9]+)*$/;

/** One cell of the within factors. */
export interface Condition {
  readonly key: string;
  readonly label: string;
  /** Level key by within factor, in factor order. */
  readonly levelKeys: readonly string[];
}

/**
 * The conditions of a protocol: the product of its within factors' levels, the last factor
 * varying fastest. A study with one within factor has that factor's levels as conditions.
 */
export function conditionsOf(withinFactors: readonly Factor[]): Condition[] {
  let cells: Condition[] = [{ key: '', label: '', levelKeys: [] }];
  for (const factor of withinFactors) {
    cells = cells.flatMap((cell) =>
      factor.levels.map((level) => ({
        key: cell.key === '' ? level.key : `${cell.key}.${level.key}`,
        label: cell.label === '' ? level.label : `${cell.label}, ${level.label}`,
        levelKeys: [...cell.levelKeys, level.key],
      })),
    );
  }
  return cells;
}
