import { createHash, createHmac } from 'node:crypto';
import { describe, expect, it } from 'vitest';
import { keyedChance, secretHashOf, slotDraw, uniformBelow } from '#core/allocation/keyed-draw.ts';
import { STUDY_ID, secretOf } from './arrivals.ts';

function bytesOf(number: number): Uint8Array {
  const bytes = new Uint8Array(32);
  new DataView(bytes.buffer).setUint32(0, number);
  return bytes;
}

describe('the draw of a slot', () => {
  it('is an HMAC that anybody with the secret can repeat', () => {
    const secret = secretOf(42);
    const draw = slotDraw({ secret, studyId: STUDY_ID, siteId: 'fen', slotNumber: 12 });
    // reference: Node.js crypto.createHmac over the documented message, written by hand
    const message = `["fairturn-allocation-1","${STUDY_ID}","fen",12,3]`;
    const expected = createHmac('sha256', secret).update(message).digest('hex');
    expect(Buffer.from(draw(3)).toString('hex')).toBe(expected);
    // reference: Node.js crypto.createHash
    expect(secretHashOf(secret)).toBe(createHash('sha256').update(secret).digest('hex'));
  });

  it('needs a whole secret and a slot number from 1', () => {
    const options = { secret: secretOf(1), studyId: 's', siteId: 't', slotNumber: 1 };
    expect(() => slotDraw({ ...options, secret: new Uint8Array(31) })).toThrow(/32 bytes/);
    expect(() => slotDraw({ ...options, slotNumber: 0 })).toThrow(/from 1/);
  });
});

describe('the draw of a block', () => {
  it('is an HMAC over its place that anybody with the secret can repeat', () => {
    const secret = secretOf(42);
    const chance = keyedChance({ secret, studyId: STUDY_ID, protocolVersion: 2 });
    // reference: Node.js crypto.createHmac over the documented message, written by hand
    const message = `["fairturn-block-1","${STUDY_ID}","fen",2,"early.left",5,1]`;
    const expected = createHmac('sha256', secret).update(message).digest('hex');
    const bytes = chance.block('fen', 'early.left', 5)(1);
    expect(Buffer.from(bytes).toString('hex')).toBe(expected);
    const slot = slotDraw({ secret, studyId: STUDY_ID, siteId: 'fen', slotNumber: 5 });
    expect(chance.slot('fen', 5)(1)).toEqual(slot(1));
  });

  it('needs a whole secret', () => {
    const options = { secret: new Uint8Array(16), studyId: 's', protocolVersion: 1 };
    expect(() => keyedChance(options).block('t', 'all', 1)).toThrow(/32 bytes, not 16/);
  });
});

describe('a number below a range', () => {
  it('rejects what would favour small numbers, and counts the draws', () => {
    // 2^32 = 6 · 715,827,882 + 4: the four largest numbers are rejected.
    const draws = [0xffff_ffff, 0xffff_fffc, 0xffff_fffb];
    const draw = (drawNumber: number) => bytesOf(draws[drawNumber - 1] ?? 0);
    expect(uniformBelow(6, draw)).toEqual({ value: 5, drawsUsed: 3 });
  });

  it('takes no draw when there is nothing to choose', () => {
    expect(uniformBelow(1, () => bytesOf(5))).toEqual({ value: 0, drawsUsed: 0 });
  });

  it('gives up on a generator that is always rejected', () => {
    expect(() => uniformBelow(3, () => bytesOf(0xffff_ffff))).toThrow(/128 draws/);
  });

  it.each([0, 1.5, 2 ** 33, Number.NaN])('refuses the range %d', (range) => {
    expect(() => uniformBelow(range, () => bytesOf(0))).toThrow(/range/);
  });

  it('is uniform', () => {
    const counts = new Array<number>(6).fill(0);
    const slots = 12_000;
    for (let slotNumber = 1; slotNumber <= slots; slotNumber += 1) {
      const draw = slotDraw({ secret: secretOf(7), studyId: 's', siteId: 't', slotNumber });
      const { value } = uniformBelow(6, draw);
      counts[value] = (counts[value] ?? 0) + 1;
    }
    const expected = slots / 6;
    const statistic = counts.reduce((sum, count) => sum + (count - expected) ** 2 / expected, 0);
    // reference: SciPy 1.17.1, stats.chi2.isf(1e-6, 5) = 35.888; fails once in a million secrets
    expect(statistic).toBeLessThan(35.888);
  });
});
