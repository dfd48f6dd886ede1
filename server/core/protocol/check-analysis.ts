import { meetsEveryCondition } from './check-scheme.ts';
import { comparedConditions } from './compared-conditions.ts';
import type { ProtocolFault } from './fault.ts';
import type { Measure, MeasurePlan, Protocol, SchemeChoice } from './protocol.ts';

/**
 * Faults of the analysis plan.
 *
 * Every measure must be planned, as primary or secondary, since what is measured without a plan is
 * what gets reported when it pleases; the exception is a measure that serves as another's exposure.
 * At least one measure must be primary.
 *
 * @param conditionKeys null when there are too many conditions to list; what names one is then not
 *   checked
 */
export function analysisFaults(
  protocol: Protocol,
  conditionKeys: readonly string[] | null,
): ProtocolFault[] {
  const { measures, analysis } = protocol;
  const faults = coverageFaults(protocol);
  const meetsAll = conditionKeys === null || meetsEveryCondition(protocol.scheme, conditionKeys);
  for (const [index, plan] of analysis.measures.entries()) {
    const pointer = `/analysis/measures/${index}`;
    const measure = measures.find(({ key }) => key === plan.measure);
    if (measure === undefined) {
      const message = `No measure is "${plan.measure}"`;
      faults.push({ pointer: `${pointer}/measure`, code: 'unknown-measure', message });
    }
    if (!meetsAll && !usesIncompleteParticipants(plan)) {
      const message =
        `${plan.method} with the primary estimate ${plan.primaryEstimate} compares conditions ` +
        'within participants who meet all of them, and some sequence leaves one out; ' +
        'repeated-measures-anova with the primary estimate adjusted-for-period uses everybody';
      const code = 'method-needs-every-condition';
      faults.push({ pointer: `${pointer}/method`, code, message });
    }
    faults.push(
      ...methodFaults(plan, measure, pointer),
      ...contrastFaults(plan, protocol.scheme, conditionKeys, pointer),
      ...equivalenceFaults(plan, measure, pointer),
    );
    if (!(plan.alpha > 0 && plan.alpha < 1)) {
      const message = 'Alpha must lie between 0 and 1, neither included';
      faults.push({ pointer: `${pointer}/alpha`, code: 'alpha-out-of-range', message });
    }
  }
  return faults;
}

/** The fit adjusted for period uses every observation; everything else needs whole participants. */
function usesIncompleteParticipants({ method, primaryEstimate }: MeasurePlan): boolean {
  return method === 'repeated-measures-anova' && primaryEstimate === 'adjusted-for-period';
}

/** Which measures are planned: each once, one at least as primary. */
function coverageFaults({ measures, analysis }: Protocol): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const planned = new Set<string>();
  for (const [index, { measure }] of analysis.measures.entries()) {
    if (planned.has(measure)) {
      const pointer = `/analysis/measures/${index}/measure`;
      const message = `The measure "${measure}" is planned more than once`;
      faults.push({ pointer, code: 'duplicate-plan', message });
    }
    planned.add(measure);
  }
  const exposures = new Set(
    measures.flatMap(({ exposure }) => (exposure?.kind === 'measure' ? [exposure.measure] : [])),
  );
  for (const [index, { key }] of measures.entries()) {
    if (planned.has(key) || exposures.has(key)) continue;
    const message = `The measure "${key}" has no analysis plan`;
    faults.push({ pointer: `/measures/${index}`, code: 'measure-without-plan', message });
  }
  if (!analysis.measures.some(({ role }) => role === 'primary')) {
    const message = 'At least one measure must be primary';
    faults.push({ pointer: '/analysis/measures', code: 'no-primary-measure', message });
  }
  return faults;
}

function methodFaults(
  plan: MeasurePlan,
  measure: Measure | undefined,
  pointer: string,
): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const scale = measure?.scale;
  if (plan.method === 'repeated-measures-anova' && (scale === 'binary' || scale === 'ordinal')) {
    const message = `${plan.method} does not suit a measure that is ${scale}; friedman does`;
    faults.push({ pointer: `${pointer}/method`, code: 'method-unsuited-to-scale', message });
  }
  if (plan.method === 'friedman' && plan.primaryEstimate === 'adjusted-for-period') {
    faults.push({
      pointer: `${pointer}/primaryEstimate`,
      code: 'estimate-unsuited-to-method',
      message: 'friedman ranks within participants and cannot adjust for period: use unadjusted',
    });
  }
  return faults;
}

function contrastFaults(
  { contrasts }: MeasurePlan,
  scheme: SchemeChoice,
  conditionKeys: readonly string[] | null,
  pointer: string,
): ProtocolFault[] {
  if (conditionKeys === null) return [];
  const compared = comparedConditions(scheme, conditionKeys);
  if (compared.length < 2 && conditionKeys.length >= 2) {
    const message =
      'Besides the condition for familiarisation, which is in no comparison, ' +
      'there are not two conditions to compare';
    return [{ pointer: `${pointer}/contrasts`, code: 'nothing-to-compare', message }];
  }
  if (contrasts.kind !== 'against-reference' || compared.includes(contrasts.reference)) return [];
  if (conditionKeys.includes(contrasts.reference)) {
    const message =
      `"${contrasts.reference}" is met first by everybody, for familiarisation, and cannot be ` +
      `told apart from period 1; references can be ${compared.join(', ')}`;
    const place = `${pointer}/contrasts/reference`;
    return [{ pointer: place, code: 'reference-is-for-familiarisation', message }];
  }
  return [
    {
      pointer: `${pointer}/contrasts/reference`,
      code: 'unknown-condition',
      message:
        `"${contrasts.reference}" is not a condition; the conditions are ` +
        conditionKeys.join(', '),
    },
  ];
}

function equivalenceFaults(
  { alpha, equivalence, method }: MeasurePlan,
  measure: Measure | undefined,
  planPointer: string,
): ProtocolFault[] {
  if (equivalence === null) return [];
  const faults: ProtocolFault[] = [];
  const pointer = `${planPointer}/equivalence`;
  if (method !== 'repeated-measures-anova') {
    const message = `Equivalence is not tested by ${method}, but by repeated-measures-anova`;
    faults.push({ pointer, code: 'equivalence-unsuited-to-method', message });
  }
  if (alpha >= 0.5 && alpha < 1) {
    // Two one-sided tests go with the interval of level 1 − 2·alpha, which must not be empty.
    const message = 'Two one-sided tests need an alpha below 0.5';
    faults.push({ pointer, code: 'alpha-too-large-for-equivalence', message });
  }
  if (measure === undefined) return faults;
  const { lower, upper } = equivalence;
  const isRatio = measure.scale === 'time-like';
  const none = isRatio ? 1 : 0;
  const isConsistent = lower < none && none < upper && (!isRatio || lower > 0);
  if (!isConsistent) {
    const message = isRatio
      ? 'The margins are ratios of geometric means: 0 < lower < 1 < upper'
      : 'The margins are differences: lower < 0 < upper';
    faults.push({ pointer, code: 'inconsistent-equivalence-margins', message });
  }
  return faults;
}
