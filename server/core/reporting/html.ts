/** Text that is already HTML. Anything else is escaped when it meets one. */
export interface Markup {
  readonly markup: string;
}

/** What may stand in a template: markup as it is, text and numbers escaped, lists joined. */
export type Content = Markup | string | number | null | readonly Content[];

/**
 * A template that escapes: every interpolated value that is not itself {@link Markup} has the five
 * characters with a meaning in HTML replaced, so that no title or label of a study can become a
 * tag or leave a quoted attribute. Null gives nothing.
 */
export function html(strings: TemplateStringsArray, ...values: readonly Content[]): Markup {
  const parts = strings.map((text, index) =>
    index < values.length ? text + markupOf(values[index]!) : text,
  );
  return { markup: parts.join('') };
}

/** Text with `& < > " '` replaced by character references. */
export function escapeHtml(text: string): string {
  return text
    .replaceAll('&', '&amp;')
    .replaceAll('<', '&lt;')
    .replaceAll('>', '&gt;')
    .replaceAll('"', '&quot;')
    .replaceAll("'", '&#39;');
}

function markupOf(content: Content): string {
  if (content === null) return '';
  if (typeof content === 'string') return escapeHtml(content);
  if (typeof content === 'number') return escapeHtml(String(content));
  if (isList(content)) return content.map(markupOf).join('');
  return content.markup;
}

function isList(content: Content): content is readonly Content[] {
  return Array.isArray(content);
}
