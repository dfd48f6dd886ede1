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
