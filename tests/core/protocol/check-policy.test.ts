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
