import { hmac } from '@noble/hashes/hmac.js';
import { sha256 } from '@noble/hashes/sha2.js';
import { bytesToHex, concatBytes, hexToBytes, utf8ToBytes } from '@noble/hashes/utils.js';
import { DomainError } from '../errors.ts';
import { canonicalJson, type JsonValue } from './canonical-json.ts';

/**
 * SHA-256 as 64 lower-case hexadecimal digits. Source: FIPS 180-4.
 *
 * @param data bytes as they are, or text, which is encoded as UTF-8 first
 * @throws {DomainError} when text holds a lone surrogate: UTF-8 would replace it, and two
 *   different texts would share one hash
 */
export function sha256Hex(data: string | Uint8Array): string {
  return bytesToHex(sha256(typeof data === 'string' ? utf8(data) : data));
}

/**
 * HMAC with SHA-256, 32 bytes. Source: RFC 2104; test vectors RFC 4231.
 *
 * @param key     any number of bytes
 * @param message text, encoded as UTF-8
 * @throws {DomainError} when the message holds a lone surrogate
 */
export function hmacSha256(key: Uint8Array, message: string): Uint8Array {
  return hmac(sha256, key, utf8(message));
}

/**
 * A commitment to a value that may one day have to be erased: SHA-256 over the salt's bytes
 * followed by the value's canonical JSON (RFC 8785, UTF-8), as hexadecimal. Once value and salt are
 * deleted, the commitment says nothing: without a salt, the hash of a rating from 1 to 7 would be
 * the rating.
 *
 * @param salt random, its own for each value, at least 16 bytes
 * @throws {DomainError} when the salt is shorter, or the value is not JSON
 */
export function saltedCommitment(salt: Uint8Array, value: JsonValue): string {
  if (salt.length < 16) {
    throw new DomainError(`A salt needs at least 16 bytes, but this one has ${salt.length}`);
  }
  return bytesToHex(sha256(concatBytes(salt, utf8ToBytes(canonicalJson(value)))));
}

/** Bytes as lower-case hexadecimal, two digits a byte. */
export function hexOfBytes(bytes: Uint8Array): string {
  return bytesToHex(bytes);
}

/**
 * The bytes that hexadecimal digits of either case stand for.
 *
 * @throws {DomainError} when the text has an odd length or another character
 */
export function bytesOfHex(hex: string): Uint8Array {
  if (!/^(?:[0-9a-fA-F]{2})*$/.test(hex)) {
    throw new DomainError('Hexadecimal text has two digits 0-9 or a-f for each byte');
  }
  return hexToBytes(hex);
}

function utf8(text: string): Uint8Array {
  if (!text.isWellFormed()) throw new DomainError('Text to be hashed holds a lone surrogate');
  return utf8ToBytes(text);
}
