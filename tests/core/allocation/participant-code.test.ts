import { randomBytes } from 'node:crypto';
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import {
  checkCharacter,
  checkCharacterHolds,
  isParticipantCode,
  issueParticipantCode,
  looksLikeContactDetail,
} from '#core/allocation/participant-code.ts';

const alphanumeric = fc.constantFrom(...'0123456789ABCDEFGHIJKLMNOPQRSTUVWXYZ');
const bodies = fc.string({ unit: alphanumeric, minLength: 1, maxLength: 20 });

describe('the check character', () => {
  // published: GRid Standard 2.1 (A12425GABC1234002M) and ISO 15706 ISAN (the other two), whose
  // check character is ISO 7064 MOD 37,36
  it.each(['A12425GABC1234002M', 'B159D8FA01240000K', '188166C7342000003'])('of %s', (code) => {
    expect(checkCharacter(code.slice(0, -1))).toBe(code.at(-1));
    expect(checkCharacterHolds(code)).toBe(true);
    expect(checkCharacterHolds(code.toLowerCase())).toBe(true);
  });

  it('holds with hyphens, which are passed over', () => {
    // published: GRid Standard 2.1, presented form
    expect(checkCharacterHolds('A1-2425G-ABC1234002-M')).toBe(true);
  });

  it('detects every wrong character', () => {
    // published: ISO/IEC 7064, the property all its systems have
    fc.assert(
      fc.property(bodies, fc.nat(), alphanumeric, (body, at, replacement) => {
        const code = body + checkCharacter(body);
        const place = at % code.length;
        fc.pre(code[place] !== replacement);
        const wrong = code.slice(0, place) + replacement + code.slice(place + 1);
        expect(checkCharacterHolds(code)).toBe(true);
        expect(checkCharacterHolds(wrong)).toBe(false);
      }),
    );
  });

  it.each(['', '-', 'P', 'P 07', 'Ä7'])('does not hold for %j', (code) => {
    expect(checkCharacterHolds(code)).toBe(false);
  });

  it('is made from letters and digits only', () => {
    expect(() => checkCharacter('A-1')).toThrow(/letters and digits/);
  });
});

describe('an issued code', () => {
  it('is unambiguous, checks, and looks like no contact detail', () => {
    const codes = Array.from({ length: 2000 }, () => issueParticipantCode(randomBytes));
    for (const code of codes) {
      expect(code).toMatch(/^[A-HJKMNP-TV-Z][2-9A-HJKMNP-TV-Z]{7}$/);
      expect(code).not.toMatch(/[UILO01]/);
      expect(checkCharacterHolds(code)).toBe(true);
      expect(isParticipantCode(code)).toBe(true);
      expect(looksLikeContactDetail(code)).toBe(false);
    }
    // 2000 of about 1.3·10^10 codes: two alike with probability about 1.5·10^−4.
    expect(new Set(codes).size).toBeGreaterThan(1998);
  });

  it('asks for other bytes when some are out of range', () => {
    const answers = [new Uint8Array(7).fill(255), new Uint8Array(7).fill(1)];
    let asked = 0;
    const code = issueParticipantCode((count) => {
      expect(count).toBe(7);
      asked += 1;
      return answers[asked - 1] ?? new Uint8Array(randomBytes(7));
    });
    expect(asked).toBeGreaterThan(1);
    expect(checkCharacterHolds(code)).toBe(true);
  });

  it('is not made from bytes that never fit', () => {
    expect(() => issueParticipantCode(() => new Uint8Array(7).fill(255))).toThrow(/128 attempts/);
  });
});

describe('the syntax of codes', () => {
  it.each(['P07', 'a', 'left_hand-12', '0'.repeat(40)])('allows %s', (code) => {
    expect(isParticipantCode(code)).toBe(true);
  });

  it.each(['', 'P 07', 'P/07', 'Ä7', '0'.repeat(41), 'P07\n'])('does not allow %j', (code) => {
    expect(isParticipantCode(code)).toBe(false);
  });
});

describe('contact details', () => {
  it.each([
    'mira@example.org',
    'mira.o+lab@mail.example.org',
    'x@y',
    'Mira <mira@example.org>',
    'mira＠example.org',
    // published: ITU-T E.123, examples of the national and international notation
    '(0609) 123 4567',
    '+22 609 123 4567',
    '0171-5550123',
    '5550123',
    'ring +44 20 7946 0000',
  ])('are seen in %j', (text) => {
    expect(looksLikeContactDetail(text)).toBe(true);
  });

  it.each(['P07', '0042', '012345', 'P-2024-0001', 'K7MQ2XTH', 'A12425GABC1234002M', '@', '+5'])(
    'are not seen in %j',
    (text) => {
      expect(looksLikeContactDetail(text)).toBe(false);
    },
  );
});
