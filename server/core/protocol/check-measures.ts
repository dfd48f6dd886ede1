import { isWholeFrom, keyFaults, type ProtocolFault } from './fault.ts';
import type { ExclusionRule, Exposure, Measure, Protocol } from './protocol.ts';

/**
 * What a trial record holds besides its measures: a measure of that key could not be told apart.
 */
export const RESERVED_MEASURE_KEYS: ReadonlySet<string> = new Set([
  'participant',
  'period',
  'repetition',
  'condition',
  'presented',
  'site',
  'stratum',
  'sequence',
  'slot',
  'visit',
  'station',
  'operator',
  'record',
  'started',
  'ended',
  'missing',
  'note',
  'deviation',
  'flags',
  'version',
  'current',
  'erased',
]);

const DECIMALS_MAX = 10;

/** Faults of the measures, each checked against what its scale allows. */
export function measureFaults(measures: readonly Measure[]): ProtocolFault[] {
  const faults = keyFaults(measures, '/measures', 'measure');
  if (measures.length === 0) {
    faults.push({ pointer: '/measures', code: 'no-measures', message: 'Nothing is measured' });
  }
  for (const [index, measure] of measures.entries()) {
    const pointer = `/measures/${index}`;
    if (RESERVED_MEASURE_KEYS.has(measure.key)) {
      const message = `"${measure.key}" names another part of a trial record`;
      faults.push({ pointer: `${pointer}/key`, code: 'reserved-key', message });
    }
    faults.push(
      ...decimalsFaults(measure, pointer),
      ...validRangeFaults(measure, pointer),
      ...pointsFaults(measure, pointer),
      ...exposureFaults(measure, measures, pointer),
    );
  }
  return faults;
}

function decimalsFaults({ scale, decimals }: Measure, measurePointer: string): ProtocolFault[] {
  const pointer = `${measurePointer}/decimals`;
  if (!isWholeFrom(0, decimals) || decimals > DECIMALS_MAX) {
    const message = `Decimals must be a whole number from 0 to ${DECIMALS_MAX}`;
    return [{ pointer, code: 'unusable-decimals', message }];
  }
  if (scale !== 'binary' || decimals === 0) return [];
  return [{ pointer, code: 'decimals-on-binary', message: 'A yes or no has no decimals' }];
}

function validRangeFaults(measure: Measure, measurePointer: string): ProtocolFault[] {
  const { scale, validRange, points } = measure;
  if (validRange === null) return [];
  const pointer = `${measurePointer}/validRange`;
  const { minimum, maximum } = validRange;
  if (scale === 'binary') {
    return [{ pointer, code: 'range-on-binary', message: 'A yes or no has no range' }];
  }
  const faults: ProtocolFault[] = [];
  if (minimum !== null && maximum !== null && minimum > maximum) {
    const message = 'The range begins above its end';
    faults.push({ pointer, code: 'range-minimum-above-maximum', message });
  }
  const reachesZero = (minimum !== null && minimum <= 0) || (maximum !== null && maximum <= 0);
  if (scale === 'time-like' && reachesZero) {
    const message = 'A time-like measure is analysed by its logarithm and must lie above zero';
    faults.push({ pointer, code: 'range-reaches-zero', message });
  }
  const isOutside = (value: number): boolean =>
    (minimum !== null && value < minimum) || (maximum !== null && value > maximum);
  if (scale === 'ordinal' && points?.some(({ value }) => isOutside(value))) {
    const message = 'A point of the rating lies outside the valid range';
    faults.push({ pointer, code: 'point-outside-range', message });
  }
  return faults;
}

function pointsFaults({ scale, points }: Measure, measurePointer: string): ProtocolFault[] {
  const pointer = `${measurePointer}/points`;
  if (scale !== 'ordinal') {
    if (points === null) return [];
    const message = `Points belong to ordinal measures, and this one is ${scale}`;
    return [{ pointer, code: 'points-on-non-ordinal', message }];
  }
  if (points === null || points.length < 2) {
    const message = 'An ordinal measure needs at least two points';
    return [{ pointer, code: 'ordinal-without-points', message }];
  }
  const faults: ProtocolFault[] = [];
  for (const [index, { value }] of points.entries()) {
    const previous = points[index - 1]?.value ?? Number.NEGATIVE_INFINITY;
    if (value > previous) continue;
    const place = `${pointer}/${index}/value`;
    const message = `The point ${value} must be above the point before it, ${previous}`;
    faults.push({ pointer: place, code: 'points-not-ascending', message });
  }
  return faults;
}

function exposureFaults(
  measure: Measure,
  measures: readonly Measure[],
  measurePointer: string,
): ProtocolFault[] {
  const { exposure } = measure;
  if (exposure === null) return [];
  const pointer = `${measurePointer}/exposure`;
  if (measure.scale !== 'count') {
    const message = `An exposure belongs to counts, and this measure is ${measure.scale}`;
    return [{ pointer, code: 'exposure-on-non-count', message }];
  }
  if (exposure.kind === 'measure') {
    return exposureMeasureFaults(measure, exposure, measures, `${pointer}/measure`);
  }
  if (exposure.value > 0) return [];
  const message = 'An exposure must be above zero';
  return [{ pointer: `${pointer}/value`, code: 'exposure-not-positive', message }];
}

function exposureMeasureFaults(
  count: Measure,
  exposure: Extract<Exposure, { kind: 'measure' }>,
  measures: readonly Measure[],
  pointer: string,
): ProtocolFault[] {
  const named = measures.find(({ key }) => key === exposure.measure);
  if (named === undefined) {
    return [{ pointer, code: 'unknown-measure', message: `No measure is "${exposure.measure}"` }];
  }
  if (named.key === count.key) {
    const message = 'A count cannot be its own exposure';
    return [{ pointer, code: 'exposure-of-itself', message }];
  }
  const faults: ProtocolFault[] = [];
  if (named.scale === 'binary' || named.scale === 'ordinal') {
    const message = `A measure that is ${named.scale} cannot be an exposure`;
    faults.push({ pointer, code: 'exposure-unsuited', message });
  }
  if (count.taken === 'once-a-period' && named.taken === 'each-trial') {
    const message = 'A count taken once a period needs an exposure taken once a period';
    faults.push({ pointer, code: 'exposure-taken-more-often', message });
  }
  return faults;
}

/** Faults of the exclusion rules. */
export function exclusionFaults(protocol: Protocol): ProtocolFault[] {
  return protocol.exclusions.flatMap((rule, index) =>
    exclusionRuleFaults(rule, protocol, `/exclusions/${index}`),
  );
}

function exclusionRuleFaults(
  rule: ExclusionRule,
  { measures, periods }: Protocol,
  pointer: string,
): ProtocolFault[] {
  if (rule.kind === 'incomplete-participant') {
    const { minimumPeriods } = rule;
    if (isWholeFrom(1, minimumPeriods) && minimumPeriods <= periods.count) return [];
    const message = `Completed periods must be a whole number from 1 to ${periods.count}`;
    return [{ pointer: `${pointer}/minimumPeriods`, code: 'unusable-minimum-periods', message }];
  }
  const faults: ProtocolFault[] = [];
  const measure = measures.find(({ key }) => key === rule.measure);
  if (measure === undefined) {
    const message = `No measure is "${rule.measure}"`;
    faults.push({ pointer: `${pointer}/measure`, code: 'unknown-measure', message });
  }
  const scale = measure?.scale;
  if (scale === 'binary' || (rule.kind === 'time-out' && scale === 'ordinal')) {
    const message = `A ${rule.kind} rule does not suit a measure that is ${scale}`;
    faults.push({ pointer: `${pointer}/measure`, code: 'exclusion-unsuited-to-scale', message });
  }
  if (rule.kind === 'time-out' && !(rule.limit > 0)) {
    const message = 'A time-out must be above zero';
    faults.push({ pointer: `${pointer}/limit`, code: 'time-out-not-positive', message });
  }
  if (rule.kind !== 'range') return faults;
  const { minimum, maximum } = rule;
  if (minimum === null && maximum === null) {
    const message = 'A range open at both ends excludes nothing';
    faults.push({ pointer, code: 'open-range', message });
  } else if (minimum !== null && maximum !== null && minimum > maximum) {
    const message = 'The range is empty: it begins above its end';
    faults.push({ pointer, code: 'empty-range', message });
  }
  return faults;
}
