import type { Minimisation, PolicyChoice } from '../protocol/protocol.ts';
import { percentText } from './number-text.ts';

/** The rule by which sequences were handed out, and what it promised, in words. */
export function policyText(policy: PolicyChoice): string {
  switch (policy.kind) {
    case 'balanced':
      return 'balanced: in each site and stratum, counts by sequence differ by at most one';
    case 'permuted-blocks': {
      const largest = Math.max(...policy.multiples);
      const sizes = policy.multiples.toSorted((a, b) => a - b).join(' or ');
      return (
        `permuted blocks (copies of each sequence in a block: ${sizes}): in each site and ` +
        `stratum, counts by sequence differ by at most ${largest}`
      );
    }
    case 'minimisation':
      return minimisationText(policy);
  }
}

function minimisationText({ imbalance, weights, bestProbability }: Minimisation): string {
  const margins = [
    `site ${weights.site}`,
    ...weights.factors.map(({ factor, weight }) => `${factor} ${weight}`),
    `study ${weights.study}`,
  ];
  return (
    `minimisation of the ${imbalance} of counts by sequence (weights: ${margins.join(', ')}); ` +
    `the best sequence was taken with probability ${percentText(bestProbability)}; no bound on a ` +
    'difference of counts was promised, and cells of site and stratum were not kept even'
  );
}
