import { expect, it } from 'vitest';
import { conditionsOf, type Factor } from '#core/protocol/protocol.ts';
import { strataOf } from '#core/protocol/strata.ts';

function factor(key: string, ...levels: string[]): Factor {
  return { key, label: key, levels: levels.map((level) => ({ key: level, label: level })) };
}

// common practice, no source: a full product with the last factor varying fastest
it('strata are the product of the between factors, in factor order', () => {
  expect(strataOf([factor('group', 'a', 'b'), factor('age', 'young', 'old')])).toEqual([
    'a.young',
    'a.old',
    'b.young',
    'b.old',
  ]);
});

it('there is one stratum when there is no between factor', () => {
  expect(strataOf([])).toEqual(['all']);
});

it('conditions are the product of the within factors, with labels', () => {
  expect(conditionsOf([factor('lamp', 'warm', 'cold'), factor('shade', 'on', 'off')])).toEqual([
    { key: 'warm.on', label: 'warm, on', levelKeys: ['warm', 'on'] },
    { key: 'warm.off', label: 'warm, off', levelKeys: ['warm', 'off'] },
    { key: 'cold.on', label: 'cold, on', levelKeys: ['cold', 'on'] },
    { key: 'cold.off', label: 'cold, off', levelKeys: ['cold', 'off'] },
  ]);
});
