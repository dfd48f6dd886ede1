import type { Factor } from './protocol.ts';

/** The one stratum of a study without between factors. */
export const SINGLE_STRATUM = 'all';

/**
 * The strata of a protocol: the product of its between factors' levels, level keys joined by a full
 * stop in factor order, the last factor varying fastest. Without between factors, the one stratum
 * `all`.
 */
export function strataOf(betweenFactors: readonly Factor[]): string[] {
  if (betweenFactors.length === 0) return [SINGLE_STRATUM];
  let strata: string[] = [''];
  for (const factor of betweenFactors) {
    strata = strata.flatMap((stratum) =>
      factor.levels.map(({ key }) => (stratum === '' ? key : `${stratum}.${key}`)),
    );
  }
  return strata;
}
