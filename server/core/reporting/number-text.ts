import type { ConfidenceInterval } from '../estimability.ts';

const NO_BREAK_SPACE = '\u00a0';

/** From here on digits before the point are no help to a reader. */
const PLAIN_MAX = 1e9;

/**
 * A number with a fixed number of decimals, a true minus sign, and no minus on a rounded zero; what
 * carrying back from logarithms made infinite is `∞`.
 *
 * @param decimals 0 to 20
 */
export function numberText(value: number, decimals: number): string {
  if (!Number.isFinite(value)) return value > 0 ? '∞' : '−∞';
  const text = Math.abs(value) < PLAIN_MAX ? Math.abs(value).toFixed(decimals) : exponential(value);
  return value < 0 && /[1-9]/.test(text) ? `−${text}` : text;
}

function exponential(value: number): string {
  return Math.abs(value).toExponential(5);
}

/** As {@link numberText} with a plus sign before what is above zero, for differences. */
export function signedText(value: number, decimals: number): string {
  const text = numberText(value, decimals);
  return value > 0 && /[1-9]/.test(text) ? `+${text}` : text;
}

/** A p-value to three decimals, `< 0.001` below, never `0.000` or `1.000` by rounding up. */
export function pValueText(pValue: number): string {
  if (pValue < 0.001) return '< 0.001';
  if (pValue > 0.999 && pValue < 1) return '> 0.999';
  return pValue.toFixed(3);
}

/** `p = 0.012` or `p < 0.001`, never broken over lines. */
export function pValuePhrase(pValue: number): string {
  const text = pValueText(pValue);
  const phrase = /^[<>]/.test(text) ? `p ${text}` : `p = ${text}`;
  return phrase.replaceAll(' ', NO_BREAK_SPACE);
}

/** `0.31 to 1.20`. */
export function intervalText({ lower, upper }: ConfidenceInterval, decimals: number): string {
  return `${numberText(lower, decimals)} to ${numberText(upper, decimals)}`;
}

/** `−0.31 to +1.20`, for differences. */
export function signedIntervalText({ lower, upper }: ConfidenceInterval, decimals: number): string {
  return `${signedText(lower, decimals)} to ${signedText(upper, decimals)}`;
}

/** `95 %`, `97.5 %`, never broken over lines. */
export function percentText(fraction: number, decimals = 1): string {
  const text = numberText(100 * fraction, decimals);
  const number = text.includes('.') ? text.replace(/\.?0+$/, '') : text;
  return `${number}${NO_BREAK_SPACE}%`;
}

/** Degrees of freedom: whole as they are, others to two decimals. */
export function degreesOfFreedomText(degreesOfFreedom: number): string {
  return Number.isInteger(degreesOfFreedom)
    ? String(degreesOfFreedom)
    : numberText(degreesOfFreedom, 2);
}

/** `1 participant`, `2 participants`. */
export function countText(count: number, singular: string, plural = `${singular}s`): string {
  return `${count} ${count === 1 ? singular : plural}`;
}
