import { describe, expect, it } from 'vitest';
import type { ComparisonSet, MeasureResult } from '#core/analysis/result-types.ts';
import { runPlan } from '#core/analysis/run-plan.ts';
import type { MeasurePlan } from '#core/protocol/protocol.ts';
import reference from '../../reference/analysis-whole-plans.json' with { type: 'json' };
import { expectRelative } from '../../support/relative.ts';
import { factorOf, measureOf, planOf, protocolOf, snapshotOfRows } from './study-of-rows.ts';

// Whole plans on open data against R. dataset: nlme ergoStool, carData OBrienKaiser.
// reference: R with afex, car, emmeans, base; tests/reference/analysis-whole-plans.R has each call
// and the JSON its versions. Double precision on both sides, so agreement to 1e-8 and not beyond.
const TOLERANCE = 1e-8;

const { ergoStool, obrienKaiser } = reference;
const stools = ['t1', 't2', 't3', 't4'];

function estimated<Result extends { readonly estimable: boolean }>(result: Result) {
  expect(result).toMatchObject({ estimable: true });
  return result as Extract<Result, { readonly estimable: true }>;
}

function near(actual: number, expected: number, what: string): void {
  expectRelative(actual, expected, TOLERANCE, what);
}

function ergoResult(
  plan: Partial<MeasurePlan>,
  scale: 'continuous' | 'time-like' = 'continuous',
  keep: (row: { participant: string; condition: string }) => boolean = () => true,
): MeasureResult {
  const protocol = protocolOf({
    withinFactors: [factorOf('stool', stools)],
    measures: [measureOf({ key: 'effort', scale })],
    analysis: { measures: [planOf({ measure: 'effort', ...plan })] },
  });
  const rows = ergoStool.rows
    .filter(keep)
    .map(({ y, ...row }) => ({ ...row, values: { effort: y } }));
  const tree = runPlan(protocol, snapshotOfRows(rows), { seed: 'any' });
  return tree.measures[0]!;
}

/** The same two values taken away as in the R script. */
const isKept = ({ participant, condition }: { participant: string; condition: string }) =>
  !(participant === 's3' && condition === 't2') && !(participant === 's7' && condition === 't4');

type Analysis = (typeof ergoStool)['analysis'];

function expectAnova(result: MeasureResult, expected: Omit<Analysis, 'pairs'>): void {
  const method = result.method!;
  if (method.method !== 'repeated-measures-anova') throw new Error('another method ran');
  expect(method.leftOut.complete).toBe(expected.complete);
  const [effect] = estimated(method.anova).effects;
  const test = estimated(effect!);
  near(test.fStatistic, expected.anova.f, 'F');
  near(test.pValue, expected.anova.p, 'p');
  expect([test.degreesOfFreedom, test.errorDegreesOfFreedom]).toEqual([
    expected.anova.df,
    expected.anova.errorDf,
  ]);
  near(test.generalisedEtaSquared, expected.anova.ges, 'generalised eta squared');
  if (!test.sphericity.applicable) throw new Error('sphericity applies to four conditions');
  near(estimated(test.sphericity.mauchly).w, expected.anova.mauchly, 'Mauchly');
  near(test.sphericity.greenhouseGeisser.epsilon, expected.anova.gg, 'GG epsilon');
  near(test.sphericity.greenhouseGeisser.pValue, expected.anova.ggP, 'GG p');
  const huynhFeldt = estimated(test.sphericity.huynhFeldt);
  // afex leaves the Huynh-Feldt epsilon above 1 where it is; ours is cut at 1 and keeps the raw one.
  near(huynhFeldt.rawEpsilon, expected.anova.hf, 'HF epsilon');
}

function expectOrder(result: MeasureResult, expected: Analysis['order']): void {
  const fit = estimated(result.order.fit);
  near(fit.residualStandardDeviation, expected.sigma, 'sigma');
  expect([fit.residualDegreesOfFreedom, fit.observations]).toEqual([expected.df, expected.n]);
  const conditionTest = estimated(fit.conditionTest);
  near(conditionTest.fStatistic, expected.conditionF, 'condition F');
  near(conditionTest.pValue, expected.conditionP, 'condition p');
  const periodTest = estimated(fit.periodTest);
  near(periodTest.fStatistic, expected.periodF, 'period F');
  near(periodTest.pValue, expected.periodP, 'period p');
  fit.conditionMeans.forEach((entry, index) => {
    expect(entry.condition).toBe(expected.conditions.level[index]);
    near(estimated(entry).mean, expected.conditions.mean[index]!, `mean ${entry.condition}`);
  });
  fit.periodMeans.forEach((entry, index) => {
    const { mean, interval, period } = estimated(entry);
    expect(period).toBe(Number(expected.periods.level[index]));
    near(mean, expected.periods.mean[index]!, `mean of period ${period}`);
    near(interval.lower, expected.periods.lower[index]!, 'lower');
    near(interval.upper, expected.periods.upper[index]!, 'upper');
  });
  const trend = estimated(fit.linearTrend);
  near(trend.estimate, expected.trend.estimate, 'trend');
  near(trend.standardError, expected.trend.se, 'trend se');
  near(trend.pValue, expected.trend.p, 'trend p');
}

function expectAdjusted(set: ComparisonSet, expected: Analysis['order']['differences']): void {
  expect(set).toMatchObject({ estimate: 'adjusted-for-period' });
  set.comparisons.forEach((comparison, index) => {
    const pair = `${comparison.first} - ${comparison.second}`;
    expect(pair).toBe(expected.contrast[index]);
    const { estimate, standardError, pValue, adjustedPValue, ...rest } = estimated(comparison);
    near(estimate, expected.estimate[index]!, pair);
    near(standardError!, expected.se[index]!, `${pair} se`);
    near(estimated(rest.interval).lower, expected.lower[index]!, `${pair} lower`);
    near(pValue, expected.p[index]!, `${pair} p`);
    near(adjustedPValue, expected.holm[index]!, `${pair} Holm`);
    if (rest.effectSizes.kind !== 'fit-standardised-difference') throw new Error('another size');
    const { d } = rest.effectSizes;
    near(d.estimate, expected.d[index]!, `${pair} d`);
    near(d.interval.lower, expected.dLower[index]!, `${pair} d, lower`);
    near(d.interval.upper, expected.dUpper[index]!, `${pair} d, upper`);
  });
}

function expectPaired(set: ComparisonSet, expected: Analysis['pairs']): void {
  expect(set).toMatchObject({ estimate: 'unadjusted', basis: 'paired-t' });
  set.comparisons.forEach((comparison, index) => {
    const row = expected[index]!;
    const pair = `${row.first} - ${row.second}`;
    expect(comparison).toMatchObject({ first: row.first, second: row.second });
    const { estimate, interval, statistic, effectSizes, ...rest } = estimated(comparison);
    near(estimate, row.estimate, pair);
    near(estimated(interval).upper, row.upper, `${pair} upper`);
    if (statistic.kind !== 't') throw new Error('a paired comparison has a t');
    near(statistic.value, row.t, `${pair} t`);
    expect([statistic.degreesOfFreedom, rest.participants]).toEqual([row.df, row.pairs]);
    near(rest.pValue, row.p, `${pair} p`);
    near(rest.adjustedPValue, row.holm, `${pair} Holm`);
    if (effectSizes.kind !== 'standardised-difference') throw new Error('another effect size');
    near(effectSizes.dz.estimate, row.dz, `${pair} dz`);
  });
}

describe('a whole plan on ergoStool equals R', () => {
  it('by repeated-measures analysis of variance, adjusted for period, complete', () => {
    const result = ergoResult({ equivalence: { lower: -2, upper: 2 } });
    expectAnova(result, ergoStool.analysis);
    expectOrder(result, ergoStool.analysis.order);
    const [primary, sensitivity] = result.method!.comparisonSets;
    expect(primary).toMatchObject({ use: 'primary', standing: 'confirmatory', familySize: 6 });
    expect(sensitivity).toMatchObject({ use: 'sensitivity', standing: 'exploratory' });
    expectAdjusted(primary!, ergoStool.analysis.order.differences);
    expectPaired(sensitivity!, ergoStool.analysis.pairs);
  });

  it('in the two one-sided tests of the paired differences', () => {
    const result = ergoResult({
      primaryEstimate: 'unadjusted',
      equivalence: { lower: -2, upper: 2 },
    });
    const [primary] = result.method!.comparisonSets;
    expect(primary).toMatchObject({ use: 'primary', estimate: 'unadjusted' });
    primary!.comparisons.forEach((comparison, index) => {
      const row = ergoStool.analysis.pairs[index]!;
      const equivalence = estimated(estimated(comparison).equivalence!);
      near(equivalence.lowerTest.pValue, row.pAboveLower, 'p above lower');
      near(equivalence.upperTest.pValue, row.pBelowUpper, 'p below upper');
    });
  });

  it('on the logarithm, with ratios', () => {
    const result = ergoResult({ equivalence: { lower: 0.8, upper: 1.25 } }, 'time-like');
    expectAnova(result, ergoStool.logarithm);
    expectOrder(result, ergoStool.logarithm.order);
    const [adjusted, paired] = result.method!.comparisonSets;
    expectAdjusted(adjusted!, ergoStool.logarithm.order.differences);
    expectPaired(paired!, ergoStool.logarithm.pairs);
    paired!.comparisons.forEach((comparison, index) => {
      const row = ergoStool.logarithm.pairs[index]!;
      const { ratio, equivalence } = estimated(comparison);
      near(estimated(ratio!).ratio, Math.exp(row.estimate), 'ratio');
      near(estimated(ratio!).interval.lower, Math.exp(row.lower), 'ratio, lower');
      near(estimated(equivalence!).lowerTest.pValue, row.pAboveLower, 'p above lower');
    });
  });

  it('with two values missing: complete participants in the one, everybody in the other', () => {
    const result = ergoResult({}, 'continuous', isKept);
    expectAnova(result, ergoStool.gaps);
    expectOrder(result, ergoStool.gaps.order);
    const [adjusted, paired] = result.method!.comparisonSets;
    expectAdjusted(adjusted!, ergoStool.gaps.order.differences);
    expectPaired(paired!, ergoStool.gaps.pairs as Analysis['pairs']);
    expect(result.method!.leftOut.participants).toEqual([
      { participantId: 's3', missingConditions: ['t2'] },
      { participantId: 's7', missingConditions: ['t4'] },
    ]);
  });

  it('by Friedman’s test', () => {
    const result = ergoResult({ method: 'friedman', primaryEstimate: 'unadjusted' });
    const method = result.method!;
    if (method.method !== 'friedman') throw new Error('another method ran');
    const test = estimated(method.friedman);
    near(test.chiSquare, ergoStool.analysis.friedman.statistic, 'chi-square');
    near(test.pValue, ergoStool.analysis.friedman['p.value'], 'p');
    expect(method.comparisonSets.map(({ basis, use }) => `${use}: ${basis}`)).toEqual([
      'primary: signed-rank',
      'sensitivity: participant-condition-period-fit',
    ]);
  });

  it('in the descriptives', () => {
    const { descriptives } = ergoResult({}, 'time-like');
    for (const { condition, summary } of descriptives.byCondition) {
      const expected = ergoStool.descriptives[condition as keyof typeof ergoStool.descriptives];
      const { mean, standardDeviation, ...rest } = estimated(summary.distribution);
      near(mean, expected.mean, 'mean');
      near(standardDeviation!, expected.sd, 'standard deviation');
      const { minimum, lowerQuartile, median, upperQuartile, maximum } = rest;
      expect([minimum, lowerQuartile, median, upperQuartile, maximum]).toEqual(expected.quantiles);
      if (summary.ofScale.scale !== 'time-like') throw new Error('another scale');
      near(estimated(summary.ofScale.geometricMean).mean, expected.geometricMean, 'geometric mean');
    }
  });

  it('in the within-participant intervals of Morey (2008), back on the measure’s own scale', () => {
    for (const scale of ['continuous', 'time-like'] as const) {
      const { withinParticipantIntervals: found } = ergoResult({}, scale).descriptives;
      const expected =
        scale === 'continuous' ? ergoStool.analysis.morey : ergoStool.logarithm.morey;
      const back = scale === 'continuous' ? (value: number) => value : Math.exp;
      estimated(found.intervals).conditions.forEach(({ condition, mean, interval }, index) => {
        expect(condition).toBe(expected.condition[index]);
        near(mean, back(expected.mean[index]!), 'mean');
        near(interval.lower, back(expected.lower[index]!), 'lower');
        near(interval.upper, back(expected.upper[index]!), 'upper');
      });
    }
  });
});

describe('comparisons against a reference', () => {
  it('turn the adjusted differences round and adjust within their own family', () => {
    const result = ergoResult({
      contrasts: { kind: 'against-reference', reference: 't3' },
      multiplicity: 'bonferroni',
    });
    const set = result.method!.comparisonSets[0]!;
    const { differences } = ergoStool.analysis.order;
    const pairs = set.comparisons.map(({ first, second }) => `${first} - ${second}`);
    expect(pairs).toEqual(['t1 - t3', 't2 - t3', 't4 - t3']);
    const last = estimated(set.comparisons[2]!);
    near(last.estimate, -differences.estimate[5]!, 't4 - t3');
    near(estimated(last.interval).lower, -differences.upper[5]!, 'lower');
    near(last.adjustedPValue, 3 * differences.p[5]!, 'Bonferroni over three');
  });
});

describe('a factorial plan on OBrienKaiser equals R', () => {
  it('in every effect of two between and two within factors, type III', () => {
    const hours = ['h1', 'h2', 'h3', 'h4', 'h5'];
    const phases = ['pre', 'post', 'fup'];
    const protocol = protocolOf({
      withinFactors: [factorOf('phase', phases), factorOf('hour', hours)],
      betweenFactors: [
        factorOf('treatment', ['control', 'a', 'b']),
        factorOf('gender', ['f', 'm']),
      ],
      measures: [measureOf({ key: 'score' })],
    });
    const rows = obrienKaiser.rows.map(({ id, treatment, gender, phase, hour, y }) => ({
      participant: id,
      stratum: `${treatment}.${gender}`,
      condition: `${phase}.${hour}`,
      period: phases.indexOf(phase) * 5 + hours.indexOf(hour) + 1,
      values: { score: y },
    }));
    const tree = runPlan(protocol, snapshotOfRows(rows), { seed: 'any' });
    const method = tree.measures[0]!.method!;
    if (method.method !== 'repeated-measures-anova') throw new Error('another method ran');
    const effects = estimated(method.anova).effects;
    expect(effects).toHaveLength(obrienKaiser.effects.length);
    for (const effect of effects) {
      const name = effect.factors.join(':');
      const expected = obrienKaiser.effects.find((entry) => entry.effect === name)!;
      const test = estimated(effect);
      near(test.fStatistic, expected.f, name);
      near(test.pValue, expected.p, `${name} p`);
      near(test.generalisedEtaSquared, expected.ges, `${name} generalised eta squared`);
      if (test.sphericity.applicable) {
        near(test.sphericity.greenhouseGeisser.epsilon, expected.gg as number, `${name} GG`);
      }
    }
    // Everybody had the conditions in one order here, so the two cannot be told apart.
    expect(method.conditionAdjustedForPeriod).toMatchObject({ estimable: false });
    expect(tree.measures[0]!.order.fit).toMatchObject({
      estimable: true,
      periodTest: { estimable: false },
    });
  });
});
