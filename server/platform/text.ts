import { z } from 'zod';

/**
 * Text of up to `max` UTF-16 units that JSON, canonical JSON and PostgreSQL can all carry: without
 * the character NUL and without half a surrogate pair.
 */
export function text(max: number) {
  return z.string().max(max).refine(isStorable, {
    message: 'Holds NUL or half a surrogate pair, which cannot be stored.',
  });
}

/** Whether JSON, canonical JSON and PostgreSQL can all carry a text. */
export function isStorable(value: string): boolean {
  return value.isWellFormed() && !value.includes('\u0000');
}

/** As `text`, without white space at its ends and with something in between. */
export function writtenText(max: number) {
  return text(max).trim().min(1);
}
