/** One start or empty tag met in a page. */
export interface Tag {
  readonly name: string;
  readonly attributes: ReadonlyMap<string, string>;
}

const TOKEN =
  /<!DOCTYPE html>|<(\/?)([a-zA-Z][a-zA-Z0-9]*)((?:\s+[a-zA-Z:-]+="[^"<]*")*)\s*(\/?)>/y;
const REFERENCE = /&(?!(?:amp|lt|gt|quot|#39);)/;

/**
 * Reads a page as well-formed markup: every element closed in order, every attribute quoted, every
 * `<` and `&` in text a reference. The content of `style` is taken as it is.
 *
 * @throws {Error} saying what is wrong where
 */
export function tagsOf(page: string): Tag[] {
  const open: string[] = [];
  const tags: Tag[] = [];
  let place = 0;
  while (place < page.length) {
    const next = page.indexOf('<', place);
    const text = page.slice(place, next === -1 ? page.length : next);
    if (open.at(-1) !== 'style' && (REFERENCE.test(text) || text.includes('>'))) {
      throw new Error(`Unescaped text: ${text.slice(0, 60)}`);
    }
    if (next === -1) break;
    TOKEN.lastIndex = next;
    const token = TOKEN.exec(page);
    if (token === null) throw new Error(`No tag: ${page.slice(next, next + 60)}`);
    place = TOKEN.lastIndex;
    const [, closing, name, attributes = '', empty] = token;
    if (name === undefined) continue;
    if (closing === '/') {
      const last = open.pop();
      if (last !== name) throw new Error(`</${name}> closes <${last}>`);
      continue;
    }
    if (REFERENCE.test(attributes)) throw new Error(`Unescaped attribute: ${attributes}`);
    tags.push({ name, attributes: attributesOf(attributes) });
    if (empty !== '/') open.push(name);
  }
  if (open.length > 0) throw new Error(`Left open: ${open.join(', ')}`);
  return tags;
}

function attributesOf(text: string): Map<string, string> {
  const found = new Map<string, string>();
  for (const [, name = '', value = ''] of text.matchAll(/([a-zA-Z:-]+)="([^"]*)"/g)) {
    if (found.has(name)) throw new Error(`Attribute ${name} twice`);
    found.set(name, value);
  }
  return found;
}
