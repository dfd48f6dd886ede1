import { DomainError } from '../errors.ts';

/** What JSON (RFC 8259) can carry, as this program holds it. */
export type JsonValue =
  | null
  | boolean
  | number
  | string
  | readonly JsonValue[]
  | { readonly [member: string]: JsonValue };

/** Deeper nesting is refused: it would exhaust the stack, and a value holding itself has no end. */
const NESTING_MAX = 500;

/**
 * The canonical text of a JSON value, so that equal values have equal bytes and can be hashed.
 *
 * Members are sorted by the UTF-16 code units of their names, numbers are written as ECMAScript
 * writes them, strings with the shortest escapes, and there is no white space.
 * Source: RFC 8785, JSON Canonicalization Scheme, sections 3.2.2 and 3.2.3.
 *
 * @param value any JSON value, nested at most 500 deep; `toJSON` methods are not consulted
 * @returns the text; its UTF-8 encoding is what RFC 8785 section 3.2.4 asks for
 * @throws {DomainError} naming the place by JSON pointer, when the value holds what JSON cannot
 *   carry: NaN, an infinity, a lone surrogate, undefined (also as a member), a function, a symbol,
 *   a bigint, or an object that is neither an array nor plain
 */
export function canonicalJson(value: JsonValue): string {
  return textOf(value, '', 0);
}

/**
 * The same value, known to be JSON: for values whose type cannot say so, such as interfaces.
 *
 * @throws {DomainError} as `canonicalJson` does
 */
export function jsonValueOf(value: unknown): JsonValue {
  textOf(value, '', 0);
  return value as JsonValue;
}

function textOf(value: unknown, pointer: string, depth: number): string {
  if (value === null) return 'null';
  switch (typeof value) {
    case 'boolean':
      return value ? 'true' : 'false';
    case 'number':
      if (!Number.isFinite(value)) throw unfit(`${value}`, pointer);
      // String(-0) is "0", as RFC 8785 wants it.
      return String(value);
    case 'string':
      return stringText(value, pointer);
    case 'object':
      if (depth >= NESTING_MAX) throw unfit(`nesting deeper than ${NESTING_MAX}`, pointer);
      return Array.isArray(value)
        ? arrayText(value, pointer, depth)
        : objectText(value, pointer, depth);
    default:
      throw unfit(`a value of type ${typeof value}`, pointer);
  }
}

/** JSON.stringify escapes a well-formed string exactly as RFC 8785 section 3.2.2.2 asks. */
function stringText(value: string, pointer: string): string {
  if (!value.isWellFormed()) throw unfit('a lone surrogate', pointer);
  return JSON.stringify(value);
}

function arrayText(value: readonly unknown[], pointer: string, depth: number): string {
  const items: string[] = [];
  for (let index = 0; index < value.length; index += 1) {
    items.push(textOf(value[index], `${pointer}/${index}`, depth + 1));
  }
  return `[${items.join(',')}]`;
}

function objectText(value: object, pointer: string, depth: number): string {
  const prototype: unknown = Object.getPrototypeOf(value);
  if (prototype !== null && prototype !== Object.prototype) {
    throw unfit('an object that is not plain', pointer);
  }
  // The default order of sort() is by UTF-16 code units.
  const members = Object.entries(value).sort(([a], [b]) => (a < b ? -1 : 1));
  const texts = members.map(([name, member]) => {
    const place = `${pointer}/${name.replaceAll('~', '~0').replaceAll('/', '~1')}`;
    return `${stringText(name, place)}:${textOf(member, place, depth + 1)}`;
  });
  return `{${texts.join(',')}}`;
}

function unfit(what: string, pointer: string): DomainError {
  return new DomainError(`JSON cannot carry ${what}, found at "${pointer}"`);
}
