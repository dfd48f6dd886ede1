import { isWholeFrom, type ProtocolFault } from './fault.ts';
import type { Factor, Minimisation, PolicyChoice } from './protocol.ts';

/** With more, a cell of ordinary size is a part of one block, and nothing is promised for it. */
export const BLOCK_MULTIPLE_MAX = 10;

/** Weights up to here keep every weighted sum of counts a whole number that a double holds. */
export const WEIGHT_MAX = 1000;

/**
 * Faults of the rule by which sequences are handed out.
 *
 * - Permuted blocks need multiples: whole numbers from 1 to BLOCK_MULTIPLE_MAX, none twice, since
 *   each is drawn as often as every other. A single one gives blocks of one size.
 * - Minimisation needs a weight for every between factor, one weight above 0 at least, and a
 *   probability of taking the best sequence above one half: below, with two sequences, it would
 *   seek imbalance.
 *
 * @returns faults with pointers from the protocol's root
 */
export function policyFaults(
  policy: PolicyChoice,
  betweenFactors: readonly Factor[],
): ProtocolFault[] {
  switch (policy.kind) {
    case 'balanced':
      return [];
    case 'permuted-blocks':
      return multipleFaults(policy.multiples);
    case 'minimisation':
      return minimisationFaults(policy, betweenFactors);
  }
}

function multipleFaults(multiples: readonly number[]): ProtocolFault[] {
  const pointer = '/policy/multiples';
  if (multiples.length === 0) {
    const message = 'Permuted blocks need a multiple, such as 1 for blocks of each sequence once';
    return [{ pointer, code: 'no-block-multiples', message }];
  }
  const faults: ProtocolFault[] = [];
  for (const [index, multiple] of multiples.entries()) {
    if (!isWholeFrom(1, multiple) || multiple > BLOCK_MULTIPLE_MAX) {
      faults.push({
        pointer: `${pointer}/${index}`,
        code: 'unusable-block-multiple',
        message: `A block multiple must be a whole number from 1 to ${BLOCK_MULTIPLE_MAX}`,
      });
    }
    if (multiples.indexOf(multiple) < index) {
      const message = `The block multiple ${multiple} stands more than once`;
      faults.push({ pointer: `${pointer}/${index}`, code: 'duplicate-block-multiple', message });
    }
  }
  return faults;
}

function minimisationFaults(
  policy: Minimisation,
  betweenFactors: readonly Factor[],
): ProtocolFault[] {
  const { weights, bestProbability } = policy;
  const pointer = '/policy/weights';
  const faults = [
    ...weightFaults(weights.site, `${pointer}/site`),
    ...weightFaults(weights.study, `${pointer}/study`),
    ...factorWeightFaults(policy, betweenFactors),
  ];
  const all = [weights.site, weights.study, ...weights.factors.map(({ weight }) => weight)];
  if (all.every((weight) => weight === 0)) {
    const message = 'With every weight 0 there is nothing to keep even; one must be above 0';
    faults.push({ pointer, code: 'no-positive-weight', message });
  }
  if (!(bestProbability > 0.5 && bestProbability <= 1)) {
    faults.push({
      pointer: '/policy/bestProbability',
      code: 'unusable-best-probability',
      message: 'The probability of taking the best sequence must be above 0.5 and at most 1',
    });
  }
  return faults;
}

function factorWeightFaults(
  { weights }: Minimisation,
  betweenFactors: readonly Factor[],
): ProtocolFault[] {
  const pointer = '/policy/weights/factors';
  const named = weights.factors.map(({ factor }) => factor);
  const faults: ProtocolFault[] = [];
  for (const [index, { factor, weight }] of weights.factors.entries()) {
    const place = `${pointer}/${index}`;
    if (!betweenFactors.some(({ key }) => key === factor)) {
      const message = `There is no between factor "${factor}"`;
      faults.push({ pointer: `${place}/factor`, code: 'unknown-factor', message });
    }
    if (named.indexOf(factor) < index) {
      const message = `The factor "${factor}" has more than one weight`;
      faults.push({ pointer: `${place}/factor`, code: 'duplicate-factor', message });
    }
    faults.push(...weightFaults(weight, `${place}/weight`));
  }
  for (const { key } of betweenFactors) {
    if (named.includes(key)) continue;
    const message = `The between factor "${key}" has no weight; 0 leaves it out of account`;
    faults.push({ pointer, code: 'factor-without-weight', message });
  }
  return faults;
}

function weightFaults(weight: number, pointer: string): ProtocolFault[] {
  if (isWholeFrom(0, weight) && weight <= WEIGHT_MAX) return [];
  const message = `A weight must be a whole number from 0 to ${WEIGHT_MAX}`;
  return [{ pointer, code: 'unusable-weight', message }];
}
