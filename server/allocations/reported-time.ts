import { ProblemError } from '#platform/problems.ts';

/** How far a station's clock may differ from the server's. */
const CLOCK_SKEW_MS = 60_000;

/**
 * When something at a station really was: as reported, or now. Clocks differ, so a time up to a
 * minute outside what can be is taken as the bound itself.
 *
 * @throws {ProblemError} `invalid-request` for a time in the future or before the arrival
 */
export function reportedTime(
  field: string,
  reported: string | undefined,
  now: Date,
  arrivedAt: Date,
): Date {
  if (reported === undefined) return now < arrivedAt ? arrivedAt : now;
  const ms = Date.parse(reported);
  const fault = (code: string, message: string) =>
    new ProblemError('invalid-request', `The time in ${field} cannot be.`, {
      faults: [{ pointer: `/${field}`, code, message }],
    });
  if (ms > now.getTime() + CLOCK_SKEW_MS) throw fault('in-the-future', 'Lies in the future.');
  if (ms < arrivedAt.getTime() - CLOCK_SKEW_MS) {
    throw fault('before-arrival', 'Lies before the arrival of the participant.');
  }
  return new Date(Math.max(Math.min(ms, now.getTime()), arrivedAt.getTime()));
}
