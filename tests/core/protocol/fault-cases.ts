import { expect, it } from 'vitest';
import { checkProtocol } from '#core/protocol/check-protocol.ts';
import type { Protocol } from '#core/protocol/protocol.ts';
import { type Mutable, validProtocol } from './valid-protocol.ts';

export type Draft = Mutable<Protocol>;
type Case = readonly [spoil: (draft: Draft) => unknown, ...faults: (readonly [string, string])[]];

function faultsOf(spoil: (draft: Draft) => unknown): [string, string][] {
  const draft = validProtocol();
  spoil(draft);
  return checkProtocol(draft).map(({ pointer, code }) => [pointer, code]);
}

/** Each case spoils a valid protocol; the faults, all of them and no other, come in this order. */
export function each(cases: Record<string, Case>): void {
  it.each(Object.entries(cases))('%s', (_, [spoil, ...faults]) => {
    expect(faultsOf(spoil)).toEqual(faults);
  });
}
