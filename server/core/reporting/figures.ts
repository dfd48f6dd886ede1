import { type Axis, axisFor } from './axis.ts';
import { html, type Markup } from './html.ts';
import { numberText } from './number-text.ts';

/** A mean with its interval, to be drawn. */
export interface Mark {
  readonly label: string;
  readonly mean: number;
  readonly lower: number;
  readonly upper: number;
}

export interface FigureInput {
  /** What a reader who cannot see it is told. */
  readonly description: string;
  /** Under the figure. */
  readonly caption: string;
  /** Of the values, with the unit. */
  readonly axisLabel: string;
  /** At least one. */
  readonly marks: readonly Mark[];
}

const WIDTH = 640;
/** Labels longer than this many characters are cut; the table beside holds them whole. */
const LABEL_LENGTH_MAX = 30;

/** One row a mark, values from left to right: for conditions, whose labels may be long. */
export function rowFigure(input: FigureInput): Markup {
  const { marks } = input;
  const axis = axisOf(marks);
  const [left, right, top, rowHeight] = [220, 20, 12, 34];
  const bottom = top + marks.length * rowHeight;
  const x = scale(axis, left, WIDTH - right);
  const rows = marks.map((mark, index) => {
    const y = top + (index + 0.5) * rowHeight;
    const [from, to] = [x(mark.lower), x(mark.upper)];
    return html`<text x="${left - 12}" y="${at(y + 4)}" text-anchor="end">${cut(mark.label)}</text>
<path class="interval" d="M${from} ${at(y)}H${to}" />
<path class="interval" d="M${from} ${at(y - 5)}V${at(y + 5)}M${to} ${at(y - 5)}V${at(y + 5)}" />
<circle class="mean" cx="${x(mark.mean)}" cy="${at(y)}" r="4.5" />
`;
  });
  const ticks = axis.ticks.map(
    (tick) => html`<path class="grid" d="M${x(tick)} ${top}V${bottom}" />
<text x="${x(tick)}" y="${bottom + 18}" text-anchor="middle">${tickText(axis, tick)}</text>
`,
  );
  const middle = (left + WIDTH - right) / 2;
  const place = html`x="${middle}" y="${bottom + 40}" text-anchor="middle"`;
  const title = html`<text class="axis" ${place}>${input.axisLabel}</text>`;
  return figure(input, bottom + 52, [...ticks, ...rows, title]);
}

/** One column a mark, values from bottom to top, means joined: for periods, which have an order. */
export function columnFigure(input: FigureInput): Markup {
  const { marks } = input;
  const axis = axisOf(marks);
  const [left, right, top, bottom] = [80, 20, 12, 232];
  const y = scale(axis, bottom, top);
  const width = (WIDTH - left - right) / marks.length;
  const centre = (index: number): string => at(left + (index + 0.5) * width);
  const columns = marks.map((mark, index) => {
    const x = left + (index + 0.5) * width;
    const [from, to] = [y(mark.lower), y(mark.upper)];
    return html`<text x="${at(x)}" y="${bottom + 20}" text-anchor="middle">${cut(mark.label)}</text>
<path class="interval" d="M${at(x)} ${from}V${to}" />
<path class="interval" d="M${at(x - 5)} ${from}H${at(x + 5)}M${at(x - 5)} ${to}H${at(x + 5)}" />
<circle class="mean" cx="${at(x)}" cy="${y(mark.mean)}" r="4.5" />
`;
  });
  const line = marks.map((mark, index) => `${centre(index)},${y(mark.mean)}`).join(' ');
  const ticks = axis.ticks.map(
    (tick) => html`<path class="grid" d="M${left} ${y(tick)}H${WIDTH - right}" />
<text x="${left - 10}" y="${y(tick)}" dy="4" text-anchor="end">${tickText(axis, tick)}</text>
`,
  );
  const middle = (top + bottom) / 2;
  const turned = html`transform="rotate(-90 18 ${middle})"`;
  const place = html`x="18" y="${middle}" text-anchor="middle" ${turned}`;
  const title = html`<text class="axis" ${place}>${input.axisLabel}</text>`;
  const joined = html`<polyline class="joined" points="${line}" />\n`;
  return figure(input, bottom + 34, [...ticks, joined, ...columns, title]);
}

function figure(input: FigureInput, height: number, content: readonly Markup[]): Markup {
  return html`<figure>
<svg viewBox="0 0 ${WIDTH} ${height}" role="img" aria-label="${input.description}">
<title>${input.description}</title>
${content}
</svg>
<figcaption>${input.caption}</figcaption>
</figure>
`;
}

function axisOf(marks: readonly Mark[]): Axis {
  return axisFor(marks.flatMap(({ mean, lower, upper }) => [mean, lower, upper]));
}

/** From a value to a coordinate, as text with one decimal. */
function scale({ minimum, maximum }: Axis, from: number, to: number): (value: number) => string {
  return (value) => at(from + ((value - minimum) / (maximum - minimum)) * (to - from));
}

function tickText({ decimals }: Axis, tick: number): string {
  return numberText(tick, decimals);
}

function at(coordinate: number): string {
  return coordinate.toFixed(1);
}

function cut(label: string): string {
  const characters = [...label];
  return characters.length <= LABEL_LENGTH_MAX
    ? label
    : `${characters.slice(0, LABEL_LENGTH_MAX - 1).join('')}…`;
}
