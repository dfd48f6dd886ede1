import { assert, DomainError } from '../errors.ts';
import { canonicalJson } from '../hashing/canonical-json.ts';
import { hmacSha256, sha256Hex } from '../hashing/digest.ts';

/** Bytes of a study's allocation secret: 256 bits. */
export const SECRET_BYTES = 32;

/**
 * Rejection takes less than two draws on average; so many in a row have probability below 2^−128.
 */
const DRAWS_MAX = 128;

const UINT32_RANGE = 2 ** 32;

/** The bytes of draw number 1, 2, … for one slot, at least four of them. */
export type Draw = (drawNumber: number) => Uint8Array;

/**
 * The keyed generator that breaks ties for one slot: HMAC-SHA-256 with the study's secret over the
 * canonical JSON of `["fairturn-allocation-1", studyId, siteId, slotNumber, drawNumber]`. Without
 * the secret the draws cannot be told from random; with it anybody can repeat them.
 * Source: HMAC as RFC 2104, used as a pseudorandom function.
 *
 * @param options.secret     SECRET_BYTES bytes
 * @param options.slotNumber the slot's number at its site, from 1
 * @throws {DomainError} when the secret has another length or slotNumber is not such a number
 */
export function slotDraw(options: {
  readonly secret: Uint8Array;
  readonly studyId: string;
  readonly siteId: string;
  readonly slotNumber: number;
}): Draw {
  const { secret, studyId, siteId, slotNumber } = options;
  requireSecret(secret);
  if (!Number.isSafeInteger(slotNumber) || slotNumber < 1) {
    throw new DomainError(`Slot numbers run from 1, but this one is ${slotNumber}`);
  }
  return (drawNumber) =>
    hmacSha256(
      secret,
      canonicalJson(['fairturn-allocation-1', studyId, siteId, slotNumber, drawNumber]),
    );
}

/** Where a study's allocations take their chance from. */
export interface Chance {
  /** The generator of one slot, see `slotDraw`. */
  slot(siteId: string, slotNumber: number): Draw;
  /** The generator of the size of one block of a cell: blocks are numbered from 1 in each. */
  block(siteId: string, stratum: string, blockNumber: number): Draw;
}

/**
 * The chance of one protocol version of a study: keyed by its secret, so that everything drawn can
 * be drawn again. Slots as `slotDraw`; blocks likewise, over
 * `["fairturn-block-1", studyId, siteId, protocolVersion, stratum, blockNumber, drawNumber]`.
 *
 * @throws {DomainError} as `slotDraw`, when a draw is asked for
 */
export function keyedChance(options: {
  readonly secret: Uint8Array;
  readonly studyId: string;
  readonly protocolVersion: number;
}): Chance {
  const { secret, studyId, protocolVersion } = options;
  return {
    slot: (siteId, slotNumber) => slotDraw({ secret, studyId, siteId, slotNumber }),
    block: (siteId, stratum, blockNumber) => {
      requireSecret(secret);
      const place = [studyId, siteId, protocolVersion, stratum, blockNumber];
      return (drawNumber) =>
        hmacSha256(secret, canonicalJson(['fairturn-block-1', ...place, drawNumber]));
    },
  };
}

function requireSecret(secret: Uint8Array): void {
  if (secret.length === SECRET_BYTES) return;
  throw new DomainError(`An allocation secret has ${SECRET_BYTES} bytes, not ${secret.length}`);
}

/** SHA-256 of the secret's bytes, hexadecimal: what is published when a study is registered. */
export function secretHashOf(secret: Uint8Array): string {
  return sha256Hex(secret);
}

/**
 * A whole number from 0 to range − 1, each equally likely when the draws' bytes are random.
 *
 * The first four bytes of a draw are read as an unsigned number; those at or above the largest
 * multiple of `range` are rejected and the next draw is taken, since a remainder alone would
 * favour small numbers. A range of 1 takes no draw.
 * Source: rejection as in NIST SP 800-90A Rev. 1, A.5.1 (simple discard method, generalised to a
 * multiple of the range).
 *
 * @param range 1 to 2^32
 * @returns the number, and how many draws it took
 * @throws {DomainError} when range is not such a number
 */
export function uniformBelow(range: number, draw: Draw): { value: number; drawsUsed: number } {
  if (!Number.isSafeInteger(range) || range < 1 || range > UINT32_RANGE) {
    throw new DomainError(`A range is a whole number from 1 to 2^32, not ${range}`);
  }
  if (range === 1) return { value: 0, drawsUsed: 0 };
  const limit = UINT32_RANGE - (UINT32_RANGE % range);
  for (let drawNumber = 1; drawNumber <= DRAWS_MAX; drawNumber += 1) {
    const bytes = draw(drawNumber);
    assert(bytes.length >= 4, 'a draw gives at least four bytes');
    const number = new DataView(bytes.buffer, bytes.byteOffset, 4).getUint32(0);
    if (number < limit) return { value: number % range, drawsUsed: drawNumber };
  }
  assert(false, `${DRAWS_MAX} draws in a row are not all rejected`);
}
