import { createHash, createHmac } from 'node:crypto';
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import {
  bytesOfHex,
  hexOfBytes,
  hmacSha256,
  saltedCommitment,
  sha256Hex,
} from '#core/hashing/digest.ts';

describe('SHA-256', () => {
  // published: NIST, FIPS 180-2 appendix B (examples with intermediate values); the empty message
  // from the NIST CAVP byte-oriented short messages
  it.each([
    ['', 'e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855'],
    ['abc', 'ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad'],
    [
      'abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq',
      '248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1',
    ],
    ['a'.repeat(1_000_000), 'cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0'],
  ])('of a published message %#', (message, digest) => {
    expect(sha256Hex(message)).toBe(digest);
    expect(sha256Hex(new TextEncoder().encode(message))).toBe(digest);
  });

  it('refuses text that UTF-8 cannot carry', () => {
    expect(() => sha256Hex('\ud800')).toThrow(/lone surrogate/);
  });
});

describe('HMAC-SHA-256', () => {
  // published: RFC 4231, test cases 1, 2, 6 and 7 (those whose data are text)
  it.each([
    [
      '0b'.repeat(20),
      'Hi There',
      'b0344c61d8db38535ca8afceaf0bf12b881dc200c9833da726e9376c2e32cff7',
    ],
    [
      '4a656665',
      'what do ya want for nothing?',
      '5bdcc146bf60754e6a042426089575c75a003f089d2739839dec58b964ec3843',
    ],
    [
      'aa'.repeat(131),
      'Test Using Larger Than Block-Size Key - Hash Key First',
      '60e431591ee0b67f0d8a26aacbf5b77f8e0bc6213728c5140546040f0ee37f54',
    ],
    [
      'aa'.repeat(131),
      'This is a test using a larger than block-size key and a larger than block-size data. ' +
        'The key needs to be hashed before being used by the HMAC algorithm.',
      '9b09ffa71b942fcb27635fbcd5b0e944bfdc63644f0713938a7f51535c3a35e2',
    ],
  ])('of a published key and message %#', (key, message, mac) => {
    expect(hexOfBytes(hmacSha256(bytesOfHex(key), message))).toBe(mac);
  });

  it('agrees with another implementation', () => {
    fc.assert(
      fc.property(fc.uint8Array({ maxLength: 100 }), fc.string({ unit: 'binary' }), (key, text) => {
        // reference: Node.js crypto.createHmac
        const other = createHmac('sha256', key).update(text, 'utf8').digest('hex');
        expect(hexOfBytes(hmacSha256(key, text))).toBe(other);
      }),
    );
  });
});

describe('salted commitment', () => {
  it('is the hash of salt and canonical text', () => {
    const salt = new Uint8Array(16).fill(7);
    // reference: Node.js crypto.createHash over bytes put together by hand
    const bytes = Buffer.concat([salt, Buffer.from('{"a":5,"b":"\u00f6"}', 'utf8')]);
    expect(saltedCommitment(salt, { b: '\u00f6', a: 5.0 })).toBe(
      createHash('sha256').update(bytes).digest('hex'),
    );
  });

  it('refuses a salt too short to hide anything', () => {
    expect(() => saltedCommitment(new Uint8Array(15), 5)).toThrow(/16 bytes/);
  });
});

describe('hexadecimal', () => {
  it('agrees with another implementation both ways', () => {
    fc.assert(
      fc.property(fc.uint8Array(), (bytes) => {
        // reference: Node.js Buffer
        const hex = Buffer.from(bytes).toString('hex');
        expect(hexOfBytes(bytes)).toBe(hex);
        expect(bytesOfHex(hex.toUpperCase())).toEqual(bytes);
      }),
    );
  });

  it.each(['abc', 'zz', ' 0a', '0x0a'])('refuses %j', (text) => {
    expect(() => bytesOfHex(text)).toThrow(/two digits/);
  });
});
