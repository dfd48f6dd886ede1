/** Thrown by the core when a function is called outside its domain: a fault of the caller. */
export class DomainError extends Error {
  override readonly name = 'DomainError';
}

/** Thrown when something that must hold does not: a fault in Fairturn itself. */
export class AssertionError extends Error {
  override readonly name = 'AssertionError';
}

/**
 * Checks what must be true on entry to a function or before a commit.
 *
 * @throws {AssertionError} naming `mustHold` when `condition` is false
 */
export function assert(condition: boolean, mustHold: string): asserts condition {
  if (!condition) throw new AssertionError(`This must hold but does not: ${mustHold}`);
}
