import { type Content, html, type Markup } from './html.ts';

export interface Column {
  readonly heading: string;
  /** Numbers stand to the right, words to the left; phrases do so without a break. */
  readonly kind: 'words' | 'number' | 'phrase';
}

export interface TableInput {
  readonly caption: Content;
  readonly columns: readonly Column[];
  /** One cell a column; the first of each row heads it. */
  readonly rows: readonly (readonly Content[])[];
}

/** Columns of words, then columns of numbers. */
export function columns(words: readonly string[], numbers: readonly string[]): Column[] {
  return [
    ...words.map((heading): Column => ({ heading, kind: 'words' })),
    ...numbers.map((heading): Column => ({ heading, kind: 'number' })),
  ];
}

/** A table with a caption and scoped headings; a sentence in its place when it has no row. */
export function table({ caption, columns: heads, rows }: TableInput): Markup {
  if (rows.length === 0) return html`<p class="none">${caption}: none.</p>`;
  const head = heads.map(
    ({ heading, kind }) => html`<th scope="col" class="${kind}">${heading}</th>`,
  );
  const body = rows.map(([first = '', ...rest]) => {
    const cells = rest.map((cell, index) => {
      const kind = heads[index + 1]?.kind ?? 'words';
      return html`<td class="${kind}">${cell}</td>`;
    });
    return html`<tr><th scope="row">${first}</th>${cells}</tr>\n`;
  });
  return html`<div class="table"><table>
<caption>${caption}</caption>
<thead><tr>${head}</tr></thead>
<tbody>
${body}</tbody>
</table></div>
`;
}

/** Steps of shading in a {@link heatTable}. */
const SHADES = 6;

/** A table of counts whose cells are shaded by size; the counts stand in them, too. */
export function heatTable(input: {
  readonly caption: Content;
  readonly corner: string;
  readonly columnHeads: readonly string[];
  readonly rows: readonly { readonly head: string; readonly counts: readonly number[] }[];
}): Markup {
  const largest = Math.max(1, ...input.rows.flatMap(({ counts }) => counts));
  const head = input.columnHeads.map((text) => html`<th scope="col" class="number">${text}</th>`);
  const body = input.rows.map(({ head: rowHead, counts }) => {
    const cells = counts.map((count) => {
      const shade = Math.round((count / largest) * (SHADES - 1));
      return html`<td class="number heat-${shade}">${count}</td>`;
    });
    return html`<tr><th scope="row">${rowHead}</th>${cells}</tr>\n`;
  });
  return html`<div class="table"><table class="heat">
<caption>${input.caption}</caption>
<thead><tr><th scope="col">${input.corner}</th>${head}</tr></thead>
<tbody>
${body}</tbody>
</table></div>
`;
}
