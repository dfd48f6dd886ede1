import { expect, it } from 'vitest';
import { policyText } from '#core/reporting/policy-text.ts';

// common practice, no source: the report says what the policy promised and what it did not
it('says for every policy what was promised', () => {
  expect(policyText({ kind: 'balanced' })).toMatch(/^balanced: .* differ by at most one$/);
  const blocks = policyText({ kind: 'permuted-blocks', multiples: [3, 1, 2] });
  expect(blocks).toMatch(/^permuted blocks .*block: 1 or 2 or 3\).* differ by at most 3$/);
  const minimisation = policyText({
    kind: 'minimisation',
    imbalance: 'range',
    weights: { site: 2, study: 1, factors: [{ factor: 'shift', weight: 5 }] },
    bestProbability: 0.8,
  });
  expect(minimisation).toContain('of the range of counts by sequence');
  expect(minimisation).toContain('(weights: site 2, shift 5, study 1)');
  expect(minimisation).toMatch(/probability 80\s?%; no bound .* was promised/);
});
