import { describe, expect, it } from 'vitest';
import type { Factor, SchemeChoice } from '#core/protocol/protocol.ts';
import { schemeText } from '#core/reporting/scheme-text.ts';
import { validProtocol } from '../protocol/valid-protocol.ts';

function factor(key: string, labels: string[]): Factor {
  return { key, label: key, levels: labels.map((label) => ({ key: label.toLowerCase(), label })) };
}

function textOf(scheme: SchemeChoice, withinFactors = [factor('Lamp', ['Warm', 'Cold', 'Dim'])]) {
  return schemeText({ ...validProtocol(), scheme, withinFactors });
}

// common practice, no source: the wording is the project's own
describe('a scheme in words', () => {
  it.each<[SchemeChoice, string]>([
    [{ kind: 'williams' }, 'Williams design'],
    [{ kind: 'orthogonal-latin-squares' }, 'complete set of orthogonal Latin squares'],
    [
      { kind: 'mirrored', base: 'cyclic-latin-square' },
      'cyclic Latin square, each sequence followed by its mirror image',
    ],
    [
      { kind: 'extra-period', base: 'williams' },
      'Williams design, the last condition repeated in an extra period',
    ],
    [{ kind: 'two-conditions', design: 'abb-baa' }, 'ABB, BAA, where A is Warm and B is Cold'],
    [
      { kind: 'balanced-incomplete-blocks', carryoverBalanced: true },
      'balanced incomplete blocks, balanced for carryover',
    ],
    [
      { kind: 'permutation-fraction', squares: 1 },
      'balanced fraction of the complete permutations: 1 Williams design',
    ],
    [
      {
        kind: 'random-permutations',
        count: 12,
        seed: '00000000000000ff',
        generator: { name: 'philox4x32-10', version: 1 },
      },
      '12 orders drawn at random, each independently ' +
        '(seed 00000000000000ff, philox4x32-10 version 1)',
    ],
    [{ kind: 'constrained-permutations', constraints: [] }, 'every order of the conditions'],
    [
      {
        kind: 'constrained-permutations',
        constraints: [
          { kind: 'never-in-periods', condition: 'warm', periods: [3, 2] },
          { kind: 'never-in-order', first: 'cold', second: 'dim' },
          { kind: 'never-adjacent', first: 'warm', second: 'dim' },
        ],
      },
      'every order of the conditions in which Warm is not in period 2 or 3; ' +
        'Dim does not come immediately after Cold; Warm and Dim are not adjacent',
    ],
    [
      {
        kind: 'constrained-permutations',
        constraints: [
          { kind: 'familiarisation-first', condition: 'dim' },
          { kind: 'always-in-periods', condition: 'warm', periods: [2] },
        ],
      },
      'every order of the conditions in which Dim is first, for familiarisation, ' +
        'and not compared; Warm is in period 2',
    ],
    [{ kind: 'custom-list', sequences: [] }, 'a list of sequences given in the protocol'],
  ])('%j', (scheme, text) => {
    expect(textOf(scheme)).toBe(text);
  });

  it('names the factor that is run in blocks', () => {
    const factors = [factor('Lamp', ['Warm', 'Cold']), factor('Shade', ['Open', 'Shut'])];
    const scheme: SchemeChoice = {
      kind: 'nested',
      blockedFactor: 2,
      blocks: 'williams',
      insideBlocks: 'cyclic-latin-square',
    };
    expect(textOf(scheme, factors)).toBe(
      'levels of Shade in blocks, in the order of a Williams design; ' +
        'inside them the other conditions in that of a cyclic Latin square',
    );
  });
});
