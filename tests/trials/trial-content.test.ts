import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { canonicalJson } from '#core/hashing/canonical-json.ts';
import { bytesOfHex, saltedCommitment } from '#core/hashing/digest.ts';
import { conditionsOf } from '#core/protocol/protocol.ts';
import { checkTrial } from '#server/trials/check-trial.ts';
import { contentText, parseContent, saltContent } from '#server/trials/trial-content.ts';
import { trialRules } from '#server/trials/trial-rules.ts';
import { exampleProtocol } from '../support/example-protocol.ts';

const protocol = exampleProtocol([]);
const rules = trialRules({ protocol, conditions: conditionsOf(protocol.withinFactors) });
const owner = { sequence: ['none', 'silk', 'merino', 'fleece'], periodReached: null };
const anyText = fc.string({ unit: 'grapheme', minLength: 1 });
const seconds = fc.double({ min: Number.MIN_VALUE, noNaN: true, noDefaultInfinity: true });

// reference: the core's canonical JSON and commitment, which are held to RFC 8785 and FIPS 180-4.
describe('the text of a record', () => {
  it('is its canonical JSON, whatever stands in it', () => {
    const row = fc.record({
      participant: fc.constant('P01'),
      period: fc.integer({ min: 1, max: 4 }),
      repetition: fc.constant(1),
      condition: fc.constantFrom('none', 'silk'),
      recordId: anyText,
      startedAt: fc.constant('2026-03-02T08:00:00+01:00'),
      endedAt: fc.constantFrom(null, '2026-03-02T08:00:01.5Z'),
      note: fc.option(anyText),
    });
    fc.assert(
      fc.property(row, seconds, fc.nat(25), fc.boolean(), (fields, time, drops, comfort) => {
        const values = new Map<string, number | boolean>([
          ['pegs-dropped', drops],
          ['pegboard-time', time],
          ['part-misseated', 1],
        ]);
        const missing = new Map<string, string>();
        if (comfort) values.set('hand-comfort', 3);
        else missing.set('hand-comfort', 'not-taken');
        const whole = { ...fields, values, missing };
        const checked = checkTrial(whole, owner, rules);
        expect(checked.faults).toEqual([]);
        const text = contentText(whole, checked, rules);
        const { participant, ...recorded } = fields;
        expect(text).toBe(
          canonicalJson({
            ...recorded,
            values: { ...Object.fromEntries(values), 'part-misseated': true },
            missing: Object.fromEntries(missing),
          }),
        );
        expect(text).not.toContain(`"${participant}"`);
      }),
    );
  });

  it('has the commitment of the core, each with a salt of its own', () => {
    const salts = new Set<string>();
    for (let index = 0; index < 600; index += 1) {
      const text = canonicalJson({ note: 'é𝄞'.repeat(index * 40), recordId: String(index) });
      const { salt, commitment } = saltContent(text);
      expect(commitment).toBe(saltedCommitment(bytesOfHex(salt), JSON.parse(text)));
      salts.add(salt);
    }
    expect(salts.size).toBe(600);
    expect(parseContent('{"period":1}')).toEqual({ period: 1 });
  });
});
