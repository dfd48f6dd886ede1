import { describe } from 'vitest';
import { each } from './fault-cases.ts';

// common practice, no source: what may be registered is the project's own rule, stated in the
// docstrings; pointers are RFC 6901
describe('permuted blocks', () => {
  each({
    'may have one size or several': [
      (p) => {
        p.policy = { kind: 'permuted-blocks', multiples: [3, 1, 10] };
      },
    ],
    'need a multiple': [
      (p) => {
        p.policy = { kind: 'permuted-blocks', multiples: [] };
      },
      ['/policy/multiples', 'no-block-multiples'],
    ],
    'need whole multiples from 1 to 10, none twice': [
      (p) => {
        p.policy = { kind: 'permuted-blocks', multiples: [2, 0, 1.5, 11, 2] };
      },
      ['/policy/multiples/1', 'unusable-block-multiple'],
      ['/policy/multiples/2', 'unusable-block-multiple'],
      ['/policy/multiples/3', 'unusable-block-multiple'],
      ['/policy/multiples/4', 'duplicate-block-multiple'],
    ],
  });
});

describe('minimisation', () => {
  const valid = () => ({
    kind: 'minimisation' as const,
    imbalance: 'variance' as const,
    weights: { site: 2, study: 1, factors: [{ factor: 'age', weight: 0 }] },
    bestProbability: 0.75,
  });
  each({
    'may leave a factor out of account, and be certain': [
      (p) => {
        p.policy = { ...valid(), bestProbability: 1 };
      },
    ],
    'needs a weight above 0': [
      (p) => {
        const weights = { site: 0, study: 0, factors: [{ factor: 'age', weight: 0 }] };
        p.policy = { ...valid(), weights };
      },
      ['/policy/weights', 'no-positive-weight'],
    ],
    'needs one weight for each between factor, and none for another': [
      (p) => {
        const factors = [
          { factor: 'lamp', weight: 1 },
          { factor: 'lamp', weight: 1 },
        ];
        p.policy = { ...valid(), weights: { site: 1, study: 1, factors } };
      },
      ['/policy/weights/factors/0/factor', 'unknown-factor'],
      ['/policy/weights/factors/1/factor', 'unknown-factor'],
      ['/policy/weights/factors/1/factor', 'duplicate-factor'],
      ['/policy/weights/factors', 'factor-without-weight'],
    ],
    'needs whole weights from 0 to 1000': [
      (p) => {
        const factors = [{ factor: 'age', weight: 1001 }];
        p.policy = { ...valid(), weights: { site: -1, study: 0.5, factors } };
      },
      ['/policy/weights/site', 'unusable-weight'],
      ['/policy/weights/study', 'unusable-weight'],
      ['/policy/weights/factors/0/weight', 'unusable-weight'],
    ],
    'takes the best sequence more often than not': [
      (p) => {
        p.policy = { ...valid(), bestProbability: 0.5 };
      },
      ['/policy/bestProbability', 'unusable-best-probability'],
    ],
    'takes it at most always': [
      (p) => {
        p.policy = { ...valid(), bestProbability: 1.01 };
      },
      ['/policy/bestProbability', 'unusable-best-probability'],
    ],
  });
});
