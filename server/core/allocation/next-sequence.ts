import { DomainError } from '../errors.ts';
import { type Draw, uniformBelow } from './keyed-draw.ts';
import { crowding, type SequenceSet, type Tally } from './tally.ts';

/** What has been issued so far, as one arrival sees it: within one protocol version. */
export interface IssuedTallies {
  /** Issued slots by sequence in the arrival's cell of site × stratum. */
  readonly cell: Int32Array;
  /** All strata of the arrival's site. */
  readonly site: Tally;
  /** All sites of the arrival's stratum. */
  readonly stratum: Tally;
  readonly study: Tally;
}

/**
 * The policy *balanced*: which sequence the next slot of a cell carries. Pure; costs
 * O(sequences · periods) at worst, whatever the number of participants.
 *
 * Candidates are narrowed step by step, each step keeping those that are smallest in:
 * 1. the count in the cell;
 * 2. the site margin; 3. the stratum margin; 4. the study margin;
 * 5. crowding of condition by period and ordered pairs at the site; 6. the same over the study
 *    (see `crowding`): what spreads a few participants over many sequences;
 * 7. a draw of the keyed generator among those that are left.
 *
 * What holds, whatever the order of arrivals:
 * - Cell: counts by sequence never differ by more than 1 (step 1).
 * - Site margin, over S strata: counts never differ by more than max(1, ⌊(S + 1) / 2⌋). Proof: let
 *   the site count of sequence a exceed that of b by d, and P be the p strata whose cell has a one
 *   ahead of b; then d ≤ p. When a was last issued in one of P, b was a candidate too, so the site
 *   count of a was not above b's, and afterwards at most 1 above. Then all of P had a ahead (in
 *   none has b been issued since, which would end the lead), so the other S − p strata had to have
 *   b ahead p − 1 times: S − p ≥ p − 1, hence d ≤ p ≤ (S + 1) / 2. From three strata on no rule can
 *   do with 1.
 * - With one stratum the cells are the sites and the stratum margin is the study margin: by the
 *   same proof with K sites, the study's counts never differ by more than max(1, ⌊(K + 1) / 2⌋).
 * - With several strata and K sites: a stratum margin by at most K, the study margin by at most K
 *   times the bound of a site; both follow from adding up the bounds above.
 *
 * Source: the restriction to the least-issued is the within-cell balance of permuted blocks;
 * working through margins in turn is hierarchical balancing (Signorini et al. 1993, Statistics in
 * Medicine 12:2343–2350). The bounds are our own, proved above and tested by adversarial arrival
 * orders.
 *
 * @param input.issued counts by sequence index; not modified. Whoever keeps them adds the slot.
 * @param input.draw   the slot's generator, see `slotDraw`
 * @returns the sequence index, and how many draws were used (0 when no tie was left)
 * @throws {DomainError} when there are no sequences or a count array has another length
 */
export function nextSequence(input: {
  readonly set: SequenceSet;
  readonly issued: IssuedTallies;
  readonly draw: Draw;
}): { sequenceIndex: number; drawsUsed: number } {
  const candidates = balancedCandidates(input);
  const { value, drawsUsed } = uniformBelow(candidates.length, input.draw);
  return { sequenceIndex: candidates[value] ?? 0, drawsUsed };
}

/**
 * The sequences among which `nextSequence` draws, each equally likely: its steps 1 to 6.
 *
 * @throws {DomainError} when there are no sequences or a count array has another length
 */
export function balancedCandidates(input: {
  readonly set: SequenceSet;
  readonly issued: IssuedTallies;
}): number[] {
  const { set, issued } = input;
  const { cell, site, stratum, study } = issued;
  const sequenceCount = set.sequences.length;
  if (sequenceCount === 0) throw new DomainError('There are no sequences to hand out');
  for (const counts of [cell, site.counts, stratum.counts, study.counts]) {
    if (counts.length !== sequenceCount) {
      throw new DomainError(`${counts.length} counts for ${sequenceCount} sequences`);
    }
  }
  let candidates = Array.from({ length: sequenceCount }, (_, index) => index);
  for (const counts of [cell, site.counts, stratum.counts, study.counts]) {
    candidates = smallest(candidates, (index) => counts[index] ?? 0);
  }
  for (const tally of [site, study]) {
    candidates = smallest(candidates, (index) => crowding(tally, set, index));
  }
  return candidates;
}

/** The candidates with the smallest measure, in their order; each is measured once. */
function smallest(
  candidates: readonly number[],
  measureOf: (candidate: number) => number,
): number[] {
  if (candidates.length === 1) return [...candidates];
  let least = Number.POSITIVE_INFINITY;
  let kept: number[] = [];
  for (const candidate of candidates) {
    const measure = measureOf(candidate);
    if (measure < least) {
      least = measure;
      kept = [candidate];
    } else if (measure === least) {
      kept.push(candidate);
    }
  }
  return kept;
}
