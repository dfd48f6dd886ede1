/** Paths of numbers in a result that are NaN or infinite, and so could not cross to JSON. */
export function nonFinitePaths(value: unknown, path = ''): string[] {
  if (typeof value === 'number') return Number.isFinite(value) ? [] : [`${path} = ${value}`];
  if (value === null || typeof value !== 'object') return [];
  return Object.entries(value).flatMap(([key, part]) => nonFinitePaths(part, `${path}/${key}`));
}
