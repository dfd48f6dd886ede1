import type { MeasureResult } from '../analysis/result-types.ts';

/** Where a method comes from. */
export interface MethodSource {
  readonly topic: string;
  readonly citation: string;
}

const ALWAYS: readonly MethodSource[] = [
  {
    topic: 'Cross-over designs, period and carryover effects',
    citation:
      'Jones & Kenward, Design and Analysis of Cross-Over Trials; ' +
      'Senn, Cross-over Trials in Clinical Research',
  },
  {
    topic: 'Why no test decides which analysis is run',
    citation: 'Freeman 1989, Statistics in Medicine 8:1421',
  },
  {
    topic: 'Within-participant confidence intervals',
    citation: 'Morey 2008, Tutorials in Quantitative Methods for Psychology 4:61',
  },
  {
    topic: 'Quartiles',
    citation: 'Hyndman & Fan 1996, American Statistician 50:361, definition 7',
  },
];

const REPEATED_MEASURES: readonly MethodSource[] = [
  {
    topic: 'Test of sphericity',
    citation: 'Mauchly 1940, Annals of Mathematical Statistics 11:204',
  },
  {
    topic: 'Corrections for sphericity',
    citation:
      'Greenhouse & Geisser 1959, Psychometrika 24:95; Huynh & Feldt 1976, Journal of ' +
      'Educational Statistics 1:69; Lecoutre 1991, Journal of Educational Statistics 16:371',
  },
  {
    topic: 'Generalised eta squared',
    citation: 'Olejnik & Algina 2003, Psychological Methods 8:434',
  },
];

const FRIEDMAN: readonly MethodSource[] = [
  {
    topic: 'Rank test over conditions',
    citation: 'Friedman 1937, Journal of the American Statistical Association 32:675',
  },
  {
    topic: 'Signed-rank comparisons and their estimate',
    citation:
      'Wilcoxon 1945, Biometrics Bulletin 1:80; ' +
      'Hodges & Lehmann 1963, Annals of Mathematical Statistics 34:598',
  },
];

const HOLM: MethodSource = {
  topic: 'Adjustment of p-values',
  citation: 'Holm 1979, Scandinavian Journal of Statistics 6:65',
};

const BONFERRONI: MethodSource = {
  topic: 'Adjustment of p-values',
  citation: 'Dunn 1961, Journal of the American Statistical Association 56:52',
};

const EQUIVALENCE: MethodSource = {
  topic: 'Equivalence by two one-sided tests',
  citation: 'Schuirmann 1987, Journal of Pharmacokinetics and Biopharmaceutics 15:657',
};

const WILSON: MethodSource = {
  topic: 'Interval of a proportion',
  citation: 'Wilson 1927, Journal of the American Statistical Association 22:209',
};

/** The published sources of the methods that these measures used, each once. */
export function sourcesOf(measures: readonly MeasureResult[]): MethodSource[] {
  const plans = measures.flatMap(({ plan }) => plan ?? []);
  return [
    ...ALWAYS,
    ...(plans.some(({ method }) => method === 'repeated-measures-anova') ? REPEATED_MEASURES : []),
    ...(plans.some(({ method }) => method === 'friedman') ? FRIEDMAN : []),
    ...(plans.some(({ multiplicity }) => multiplicity === 'holm') ? [HOLM] : []),
    ...(plans.some(({ multiplicity }) => multiplicity === 'bonferroni') ? [BONFERRONI] : []),
    ...(plans.some(({ equivalence }) => equivalence !== null) ? [EQUIVALENCE] : []),
    ...(measures.some(({ scale }) => scale === 'binary') ? [WILSON] : []),
  ];
}
