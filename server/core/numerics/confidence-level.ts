import { DomainError } from '../errors.ts';

/** @throws {DomainError} when a confidence level is not strictly between 0 and 1 */
export function assertConfidenceLevel(confidenceLevel: number): void {
  if (!(confidenceLevel > 0 && confidenceLevel < 1)) {
    throw new DomainError(`A confidence level lies between 0 and 1, got ${confidenceLevel}.`);
  }
}
