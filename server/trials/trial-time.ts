const ISO_8601 =
  /^(\d{4})-(\d{2})-(\d{2})T(\d{2}):(\d{2})(?::(\d{2})(?:[.,]\d{1,9})?)?(Z|[+-]\d{2}:\d{2})$/;

/**
 * Milliseconds since 1970 of an ISO 8601 date and time with its offset from UTC (extended format;
 * RFC 3339 allows the same and asks for seconds). Null for anything else, such as 30 February or a
 * time without offset: what a station's clock shows is a moment only together with its offset.
 */
export function momentOf(text: string): number | null {
  const match = ISO_8601.exec(text);
  if (match === null) return null;
  const [, year, month, day] = match;
  if (Number(day) > 28 && Number(day) > daysIn(Number(year), Number(month))) return null;
  const moment = Date.parse(text.replace(',', '.'));
  return Number.isNaN(moment) ? null : moment;
}

/** Days of a month, counted from 1. */
function daysIn(year: number, month: number): number {
  return new Date(Date.UTC(year, month, 0)).getUTCDate();
}
