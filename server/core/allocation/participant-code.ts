import { assert, DomainError } from '../errors.ts';

/** Participant codes as typed: letters, digits, hyphen and underscore, 1 to 40 of them. */
export const PARTICIPANT_CODE_PATTERN = /^[A-Za-z0-9_-]{1,40}$/;

/** The characters of ISO 7064 MOD 37,36, in the order of their values 0 to 35. */
const ISO_7064_CHARACTERS = '0123456789ABCDEFGHIJKLMNOPQRSTUVWXYZ';

/** Issued codes avoid characters that are misread or misheard for one another: 0 O, 1 I L, U V. */
const LETTERS = 'ABCDEFGHJKMNPQRSTVWXYZ';
const UNAMBIGUOUS = `23456789${LETTERS}`;

/** Seven characters, about 1.6·10^10 codes, and the check character. */
const BODY_LENGTH = 7;

/** One attempt in six meets an ambiguous check character; so many in a row, once in 10^99. */
const ATTEMPTS_MAX = 128;

/** Telephone numbers have at least seven digits; up to fifteen in ITU-T E.164. */
const TELEPHONE_DIGITS_MIN = 7;

/**
 * Whether a text looks like an e-mail address or a telephone number, which must not stand where a
 * pseudonym belongs.
 *
 * E-mail: an @ between characters that are not white space, anywhere in the text. Telephone: a plus
 * sign followed by seven or more digits anywhere, or a text of nothing but digits and the usual
 * separators (space, hyphen, point, slash, parentheses) with seven or more digits. So `P-0042` and
 * `012345` pass, `0171 5550123` and `2024-000-17` do not: a code of digits alone should be short.
 * Source: RFC 5322 (addr-spec) and ITU-T E.123/E.164, both taken widely: this is a safety net and
 * not a validator.
 */
export function looksLikeContactDetail(text: string): boolean {
  const plain = text.normalize('NFKC');
  if (/[^\s@]@[^\s@]/.test(plain)) return true;
  if (/\+(?:[\s().\-/]*\d){7}/.test(plain)) return true;
  const digits = plain.replace(/\D/g, '').length;
  return digits >= TELEPHONE_DIGITS_MIN && /^[\d\s().\-/]+$/.test(plain);
}

/** Whether a text has the form of a participant code. Whether it is a contact detail is another
 * question, see `looksLikeContactDetail`. */
export function isParticipantCode(text: string): boolean {
  return PARTICIPANT_CODE_PATTERN.test(text);
}

/**
 * The check character of ISO 7064 MOD 37,36: it detects every single wrong character and nearly
 * every transposition of neighbours.
 * Source: ISO/IEC 7064:2003, hybrid system MOD 37,36.
 *
 * @param body letters (of either case) and digits, at least one
 * @returns one character 0–9 or A–Z
 * @throws {DomainError} when the body is empty or has another character
 */
export function checkCharacter(body: string): string {
  if (!/^[0-9A-Za-z]+$/.test(body)) {
    throw new DomainError('A check character is made from letters and digits, at least one');
  }
  const product = productOf(body.toUpperCase());
  return ISO_7064_CHARACTERS[(37 - product) % 36] ?? '';
}

/**
 * Whether a code ends in the check character of what stands before it. Hyphens and underscores are
 * passed over, and case does not matter.
 * Source: ISO/IEC 7064:2003, hybrid system MOD 37,36.
 *
 * @returns false too for codes that are malformed or shorter than two letters and digits
 */
export function checkCharacterHolds(code: string): boolean {
  if (!isParticipantCode(code)) return false;
  const characters = code.replace(/[-_]/g, '').toUpperCase();
  if (characters.length < 2) return false;
  return checkCharacter(characters.slice(0, -1)) === characters.at(-1);
}

/**
 * A new participant code of eight unambiguous characters: a letter, six letters or digits, and the
 * check character of ISO 7064 MOD 37,36. Uniform over the codes whose check character is
 * unambiguous too. It begins with a letter, so that it can never look like a telephone number. Two
 * codes may coincide: who stores them must ask for another then.
 *
 * @param randomBytes gives that many random bytes
 * @throws {AssertionError} when the bytes are not random: 128 attempts in a row failed
 */
export function issueParticipantCode(randomBytes: (count: number) => Uint8Array): string {
  for (let attempt = 0; attempt < ATTEMPTS_MAX; attempt += 1) {
    const body = bodyFrom(randomBytes(BODY_LENGTH));
    if (body === null) continue;
    const check = checkCharacter(body);
    if (UNAMBIGUOUS.includes(check)) return body + check;
  }
  assert(false, 'random bytes give an unambiguous code within 128 attempts');
}

/**
 * Whether a code has the form of those that `issueParticipantCode` gives, in either case, whatever
 * its check character. A lab's own code can have that form by chance.
 */
export function hasIssuedForm(code: string): boolean {
  return new RegExp(`^[${LETTERS}][${UNAMBIGUOUS}]{${BODY_LENGTH}}$`, 'i').test(code);
}

/**
 * Null when a byte lies above the largest multiple of the alphabet: a remainder would be biased.
 */
function bodyFrom(bytes: Uint8Array): string | null {
  assert(bytes.length === BODY_LENGTH, 'the source of random bytes gives as many as asked for');
  let body = '';
  for (const byte of bytes) {
    const alphabet = body === '' ? LETTERS : UNAMBIGUOUS;
    if (byte >= 256 - (256 % alphabet.length)) return null;
    body += alphabet[byte % alphabet.length] ?? '';
  }
  return body;
}

/** The running product of the standard's recursive method, after all characters of the body. */
function productOf(body: string): number {
  let product = 36;
  for (const character of body) {
    const sum = (product + ISO_7064_CHARACTERS.indexOf(character)) % 36;
    product = ((sum === 0 ? 36 : sum) * 2) % 37;
  }
  return product;
}
