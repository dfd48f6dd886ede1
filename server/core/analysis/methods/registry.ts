import type { AnalysisMethod } from '../../protocol/protocol.ts';
import { friedman } from './friedman.ts';
import type { Method } from './method.ts';
import { repeatedMeasuresAnovaMethod } from './repeated-measures-anova.ts';

/** Every method that a plan can name. The compiler asks for a line here for each in the union. */
export const METHODS: { readonly [Key in AnalysisMethod]: Method & { readonly key: Key } } = {
  'repeated-measures-anova': repeatedMeasuresAnovaMethod,
  friedman,
};
