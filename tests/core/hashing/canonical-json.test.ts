import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { canonicalJson, jsonValueOf } from '#core/hashing/canonical-json.ts';

function doubleOf(hex: string): number {
  return Buffer.from(hex, 'hex').readDoubleBE(0);
}

describe('canonical JSON', () => {
  it('writes the sample of the standard', () => {
    // published: RFC 8785, section 3.2.2 (input) and section 3.2.3 (output)
    const input = String.raw`{
      "numbers": [333333333.33333329, 1E30, 4.50, 2e-3, 0.000000000000000000000000001],
      "string": "\u20ac$\u000F\u000aA'\u0042\u0022\u005c\\\"\/",
      "literals": [null, true, false]
    }`;
    const expected = [
      '{"literals":[null,true,false],',
      '"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],',
      String.raw`"string":"€$\u000f\nA'B\"\\\\\"/"}`,
    ].join('');
    expect(canonicalJson(JSON.parse(input))).toBe(expected);
  });

  it('sorts members by UTF-16 code units', () => {
    // published: RFC 8785, section 3.2.3, the sorting sample and the order it asks for
    const sample = {
      '\u20ac': 'Euro Sign',
      '\r': 'Carriage Return',
      '\ufb33': 'Hebrew Letter Dalet With Dagesh',
      '1': 'One',
      '\ud83d\ude00': 'Emoji: Grinning Face',
      '\u0080': 'Control',
      '\u00f6': 'Latin Small Letter O With Diaeresis',
    };
    const text = canonicalJson(sample);
    expect([...text.matchAll(/:"([^"]*)"/g)].map((match) => match[1])).toEqual([
      'Carriage Return',
      'One',
      'Control',
      'Latin Small Letter O With Diaeresis',
      'Euro Sign',
      'Emoji: Grinning Face',
      'Hebrew Letter Dalet With Dagesh',
    ]);
  });

  // published: RFC 8785, appendix B: IEEE 754 bits and their JSON text
  it.each([
    ['0000000000000000', '0'],
    ['8000000000000000', '0'],
    ['0000000000000001', '5e-324'],
    ['8000000000000001', '-5e-324'],
    ['7fefffffffffffff', '1.7976931348623157e+308'],
    ['ffefffffffffffff', '-1.7976931348623157e+308'],
    ['4340000000000000', '9007199254740992'],
    ['c340000000000000', '-9007199254740992'],
    ['4430000000000000', '295147905179352830000'],
    ['44b52d02c7e14af5', '9.999999999999997e+22'],
    ['44b52d02c7e14af6', '1e+23'],
    ['44b52d02c7e14af7', '1.0000000000000001e+23'],
    ['444b1ae4d6e2ef4e', '999999999999999700000'],
    ['444b1ae4d6e2ef4f', '999999999999999900000'],
    ['444b1ae4d6e2ef50', '1e+21'],
    ['3eb0c6f7a0b5ed8c', '9.999999999999997e-7'],
    ['3eb0c6f7a0b5ed8d', '0.000001'],
    ['41b3de4355555553', '333333333.3333332'],
    ['41b3de4355555554', '333333333.33333325'],
    ['41b3de4355555555', '333333333.3333333'],
    ['41b3de4355555556', '333333333.3333334'],
    ['41b3de4355555557', '333333333.33333343'],
    ['becbf647612f3696', '-0.0000033333333333333333'],
    ['43143ff3c1cb0959', '1424953923781206.2'],
  ])('writes the double %s as %s', (bits, text) => {
    expect(canonicalJson(doubleOf(bits))).toBe(text);
  });

  // published: RFC 8785, appendix B and section 3.2.2.2: NaN, Infinity, lone surrogates are errors
  it.each([
    ['NaN', { a: [0, doubleOf('7fffffffffffffff')] }, '/a/1'],
    ['Infinity', { a: doubleOf('7ff0000000000000') }, '/a'],
    ['a lone surrogate', ['\ud800'], '/0'],
    ['a lone surrogate in a name', { '\udead': 1 }, '/'],
    ['an undefined member', { a: { 'b/c~d': undefined } }, '/a/b~1c~0d'],
    ['an undefined item', [undefined], '/0'],
    ['a date', { when: new Date(0) }, '/when'],
    ['a bigint', { n: 1n }, '/n'],
    ['a function', { f: () => 1 }, '/f'],
  ])('refuses %s and says where', (_, value, pointer) => {
    const error = errorOf(() => jsonValueOf(value));
    expect(error).toMatchObject({ name: 'DomainError' });
    expect(String(error)).toContain(pointer);
  });

  it('refuses a value that holds itself', () => {
    const value: unknown[] = [];
    value.push(value);
    expect(() => jsonValueOf(value)).toThrow(/nesting deeper/);
  });

  it('gives text that parses back, the same for every order of members', () => {
    const value = fc.jsonValue({ stringUnit: 'binary' });
    fc.assert(
      fc.property(fc.dictionary(fc.string(), value), (members) => {
        const text = canonicalJson(jsonValueOf(members));
        const reversed = Object.fromEntries(Object.entries(members).toReversed());
        expect(canonicalJson(jsonValueOf(reversed))).toBe(text);
        // −0 is written as 0 by the standard, and so does JSON.stringify.
        expect(JSON.parse(text)).toEqual(JSON.parse(JSON.stringify(members)));
      }),
    );
  });
});

function errorOf(act: () => unknown): unknown {
  try {
    act();
  } catch (error) {
    return error;
  }
  throw new Error('nothing was thrown');
}
