import { randomFillSync } from 'node:crypto';

/**
 * A UUID of version 7 (RFC 9562 §5.7): 48 bits of Unix time in milliseconds, then random bits, so
 * that ids sort roughly by creation and index pages fill in order.
 */
export function uuidv7(): string {
  const bytes = randomFillSync(Buffer.alloc(16));
  bytes.writeUIntBE(Date.now(), 0, 6);
  bytes.writeUInt8((bytes.readUInt8(6) & 0x0f) | 0x70, 6);
  bytes.writeUInt8((bytes.readUInt8(8) & 0x3f) | 0x80, 8);
  return bytes.toString('hex').replace(/^(.{8})(.{4})(.{4})(.{4})(.{12})$/, '$1-$2-$3-$4-$5');
}

/** The 12 bits after the version that RFC 9562 §6.2 (method 1) lets count within a millisecond. */
const COUNTER_MAX = 0xfff;

/**
 * Gives UUIDs of version 7 that ascend in the order in which they are asked for, also within one
 * millisecond: when its counter is used up, the time runs ahead of the clock.
 */
export function ascendingUuids(): () => string {
  let time = 0;
  let counter = 0;
  // Random bytes are drawn for many ids at a time, which is far cheaper.
  const drawn = Buffer.alloc(8 * 256);
  let next = drawn.length;
  return () => {
    const now = Date.now();
    if (now > time) {
      time = now;
      counter = 0;
    } else if (counter === COUNTER_MAX) {
      time += 1;
      counter = 0;
    } else counter += 1;
    if (next === drawn.length) {
      randomFillSync(drawn);
      next = 0;
    }
    drawn.writeUInt8((drawn.readUInt8(next) & 0x3f) | 0x80, next);
    const tail = drawn.toString('hex', next, next + 8);
    next += 8;
    const head = time.toString(16).padStart(12, '0');
    const count = counter.toString(16).padStart(3, '0');
    return `${head.slice(0, 8)}-${head.slice(8)}-7${count}-${tail.slice(0, 4)}-${tail.slice(4)}`;
  };
}
