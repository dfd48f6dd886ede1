import { DomainError } from '../errors.ts';
import { isWholeFrom, type ProtocolFault } from './fault.ts';
import { parseDuration } from './iso8601.ts';
import type { PeriodPlan } from './protocol.ts';

/** Longer sequences than this are a typing error. */
const PERIODS_MAX = 1000;

/** Faults of the number of periods, repetitions, visits and washout. */
export function periodFaults(periods: PeriodPlan): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const { count, repetitions } = periods;
  if (!isWholeFrom(2, count) || count > PERIODS_MAX) {
    const message = `The number of periods must be a whole number from 2 to ${PERIODS_MAX}`;
    faults.push({ pointer: '/periods/count', code: 'unusable-period-count', message });
  }
  if (!isWholeFrom(1, repetitions)) {
    const message = 'Repetitions in a period must be a whole number of at least 1';
    faults.push({ pointer: '/periods/repetitions', code: 'unusable-repetitions', message });
  }
  return [...faults, ...visitFaults(periods), ...washoutFaults(periods.washout)];
}

function visitFaults({ count, visits }: PeriodPlan): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  for (const [index, visit] of visits.entries()) {
    if (visit.length > 0) continue;
    const message = 'A visit needs at least one period';
    faults.push({ pointer: `/periods/visits/${index}`, code: 'empty-visit', message });
  }
  const inOrder = visits.flat();
  if (inOrder.length !== count || inOrder.some((period, index) => period !== index + 1)) {
    faults.push({
      pointer: '/periods/visits',
      code: 'visits-do-not-partition-periods',
      message: `The visits must hold the periods 1 to ${count}, each once and in order`,
    });
  }
  return faults;
}

function washoutFaults(washout: PeriodPlan['washout']): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const read = (text: string, end: 'minimum' | 'maximum'): number | null => {
    try {
      return parseDuration(text);
    } catch (error) {
      if (!(error instanceof DomainError)) throw error;
      const pointer = `/periods/washout/${end}`;
      faults.push({ pointer, code: 'unreadable-duration', message: error.message });
      return null;
    }
  };
  const minimum = read(washout.minimum, 'minimum');
  const maximum = washout.maximum === null ? null : read(washout.maximum, 'maximum');
  if (minimum !== null && maximum !== null && maximum < minimum) {
    const message = 'The longest washout is shorter than the shortest';
    faults.push({ pointer: '/periods/washout', code: 'washout-maximum-below-minimum', message });
  }
  return faults;
}
