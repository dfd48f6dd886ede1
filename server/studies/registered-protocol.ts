import type { SequenceSet } from '#core/allocation/tally.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { assert } from '#core/errors.ts';
import { sha256Hex } from '#core/hashing/digest.ts';
import { type Condition, conditionsOf, type Protocol } from '#core/protocol/protocol.ts';
import { strataOf } from '#core/protocol/strata.ts';
import type { Executor } from '#platform/database.ts';
import { ProblemError } from '#platform/problems.ts';
import { ProtocolDocument } from './protocol-document.ts';
import * as store from './store.ts';

/** A registered version, parsed, with what follows from it. Shared: nobody changes it. */
export interface RegisteredProtocol {
  readonly number: number;
  /** Of the canonical JSON, hexadecimal. */
  readonly sha256: string;
  readonly protocol: Protocol;
  /** In protocol order; condition indices point into this array. */
  readonly conditions: readonly Condition[];
  readonly strata: readonly string[];
  /** The scheme's sequences, in the order that `sequence_index` counts, and the condition count. */
  readonly set: SequenceSet;
}

/** Registered versions never change, so what was parsed once is kept, the latest used last. */
const PARSED_MAX = 64;
const parsed = new Map<string, RegisteredProtocol>();

/**
 * A registered version of a study's protocol.
 *
 * @throws {ProblemError} `not-found` when there is no such registered version
 * @throws {AssertionError} when the stored document does not have the stored hash
 */
export async function registeredProtocol(
  executor: Executor,
  studyId: string,
  number: number,
): Promise<RegisteredProtocol> {
  const key = `${studyId}/${number}`;
  const kept = parsed.get(key);
  const registered = kept ?? (await readRegisteredProtocol(executor, studyId, number));
  parsed.delete(key);
  parsed.set(key, registered);
  const [oldest] = parsed.keys();
  if (parsed.size > PARSED_MAX && oldest !== undefined) parsed.delete(oldest);
  return registered;
}

/** @see registeredProtocol; always read and checked anew */
export async function readRegisteredProtocol(
  executor: Executor,
  studyId: string,
  number: number,
): Promise<RegisteredProtocol> {
  const row = await store.selectRegisteredVersion(executor, studyId, number);
  if (row === null) {
    throw new ProblemError('not-found', `The study has no registered version ${number}.`);
  }
  assert(sha256Hex(row.document) === row.sha256, 'a registered protocol has its registered hash');
  const protocol: Protocol = ProtocolDocument.parse(JSON.parse(row.document));
  const conditions = conditionsOf(protocol.withinFactors);
  const keys = conditions.map((condition) => condition.key);
  const sequences = sequencesOf(protocol.scheme, keys, protocol.periods.count);
  return {
    number,
    sha256: row.sha256,
    protocol,
    conditions,
    strata: strataOf(protocol.betweenFactors),
    set: { sequences, conditionCount: conditions.length },
  };
}
