import type { PolicyChoice } from '../protocol/protocol.ts';

/** The rule by which sequences were handed out, and what it promised, in words. */
export function policyText(policy: PolicyChoice): string {
  switch (policy.kind) {
    case 'balanced':
      return 'balanced: in each site and stratum, counts by sequence differ by at most one';
    case 'permuted-blocks': {
      const largest = Math.max(...policy.multiples);
      const sizes = policy.multiples.toSorted((a, b) => a - b).join(' or ');
      return (
        `permuted blocks (copies of each sequence in a block: ${sizes}): in each site and stratum, ` +
        `counts by sequence differ by at most ${largest}`
      );
    }
  }
}
