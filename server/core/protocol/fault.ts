import { KEY_PATTERN } from './protocol.ts';

/** One thing wrong with a protocol: where (RFC 6901 JSON pointer), what (code) and in words. */
export interface ProtocolFault {
  readonly pointer: string;
  readonly code: string;
  readonly message: string;
}

const KEY_LENGTH_MAX = 40;

/**
 * Faults of a list of keyed things: malformed keys, and keys that stand twice. A repeated key is a
 * fault of its later occurrence.
 *
 * @param items   the list, in document order
 * @param pointer JSON pointer of the list
 * @param noun    what one item is called, for the message
 */
export function keyFaults(
  items: readonly { readonly key: string }[],
  pointer: string,
  noun: string,
): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const seen = new Set<string>();
  for (const [index, { key }] of items.entries()) {
    const place = `${pointer}/${index}/key`;
    if (!KEY_PATTERN.test(key) || key.length > KEY_LENGTH_MAX) {
      faults.push({
        pointer: place,
        code: 'malformed-key',
        message:
          `The ${noun} key "${key}" must be lower-case words joined by hyphens, begin with a ` +
          `letter and have at most ${KEY_LENGTH_MAX} characters`,
      });
    }
    if (seen.has(key)) {
      faults.push({
        pointer: place,
        code: 'duplicate-key',
        message: `The ${noun} key "${key}" stands more than once`,
      });
    }
    seen.add(key);
  }
  return faults;
}

/** Whether `value` is a whole number of at least `minimum` that a double holds exactly. */
export function isWholeFrom(minimum: number, value: number): boolean {
  return Number.isSafeInteger(value) && value >= minimum;
}
