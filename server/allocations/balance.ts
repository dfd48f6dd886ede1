import { designProperties } from '#core/designs/design-properties.ts';
import type { Call } from '#platform/call.ts';
import { type Database, sqlExecutor } from '#platform/database.ts';
import { ProblemError } from '#platform/problems.ts';
import {
  type RegisteredProtocol,
  registeredProtocol,
  requireVisibleStudy,
  studySites,
} from '#server/studies/service.ts';
import type { BalanceResponse } from './schemas.ts';
import * as store from './store-slots.ts';

/**
 * How slots and completed participants are spread within one protocol version: by site × stratum
 * and by site over the sequences, and over condition by period and ordered pairs. No measured value
 * comes into it, so this is no look.
 *
 * @throws {ProblemError} `not-found` for a study or version, `wrong-state` before registration
 */
export function getBalance(
  database: Database,
  call: Call,
  studyId: string,
  protocolVersion: number | undefined,
): Promise<BalanceResponse> {
  return database.inSqlTransaction(async (tx) => {
    const executor = sqlExecutor(tx);
    const study = await requireVisibleStudy(executor, call.principal, studyId);
    const number = protocolVersion ?? study.currentVersion;
    if (number === null) {
      throw new ProblemError('wrong-state', 'The study has no registered protocol yet.');
    }
    const registered = await registeredProtocol(executor, study.id, number);
    const { count } = registered.protocol.periods;
    const planned = await store.selectSequenceCounts(tx, study.id, number);
    const completed = await store.selectCompletedCounts(tx, study.id, number, count);
    const sites = await studySites(executor, study.id);
    return {
      protocolVersion: number,
      conditions: registered.conditions.map(({ key, label }) => ({ key, label })),
      sequences: registered.set.sequences.map((sequence) =>
        sequence.map((condition) => registered.conditions[condition]?.key ?? ''),
      ),
      cells: sites.flatMap(({ siteId }) =>
        registered.strata.map((stratum) => {
          const here = (row: store.SequenceCountRow) =>
            row.siteId === siteId && row.stratum === stratum;
          return { siteId, stratum, ...bothCounts(registered, planned, completed, here) };
        }),
      ),
      sites: sites.map((site) => ({
        ...site,
        ...bothCounts(registered, planned, completed, (row) => row.siteId === site.siteId),
      })),
      ...conditionCounts(
        registered,
        bySequence(registered, planned),
        await store.selectCompletedPeriods(tx, study.id, number),
      ),
    };
  });
}

function bothCounts(
  registered: RegisteredProtocol,
  planned: readonly store.SequenceCountRow[],
  completed: readonly store.SequenceCountRow[],
  here: (row: store.SequenceCountRow) => boolean,
) {
  return {
    planned: bySequence(registered, planned.filter(here)),
    completed: bySequence(registered, completed.filter(here)),
  };
}

function bySequence(
  registered: RegisteredProtocol,
  rows: readonly store.SequenceCountRow[],
): number[] {
  const counts = new Array<number>(registered.set.sequences.length).fill(0);
  for (const { sequenceIndex, issued } of rows) {
    counts[sequenceIndex] = (counts[sequenceIndex] ?? 0) + issued;
  }
  return counts;
}

/** Condition by period and ordered pairs: each sequence's own counts, as often as it was issued. */
function conditionCounts(
  registered: RegisteredProtocol,
  planned: readonly number[],
  completed: readonly store.CompletedPeriodRow[],
): Pick<BalanceResponse, 'conditionByPeriod' | 'orderedPairs'> {
  const { sequences, conditionCount } = registered.set;
  const keys = registered.conditions.map(({ key }) => key);
  const { count } = registered.protocol.periods;
  const byPeriod = keys.map((condition) => ({
    condition,
    planned: new Array<number>(count).fill(0),
    completed: new Array<number>(count).fill(0),
  }));
  const pairs = keys.map((first) =>
    keys.map((second) => ({ first, second, planned: 0, completed: 0 })),
  );
  for (const [index, sequence] of sequences.entries()) {
    const issued = planned[index] ?? 0;
    if (issued === 0) continue;
    const own = designProperties([sequence], conditionCount);
    for (const [condition, row] of byPeriod.entries()) {
      for (const [periodIndex, times] of (own.conditionByPeriod[condition] ?? []).entries()) {
        row.planned[periodIndex] = (row.planned[periodIndex] ?? 0) + issued * times;
      }
      for (const [second, pair] of (pairs[condition] ?? []).entries()) {
        pair.planned += issued * (own.orderedPairs[condition]?.[second] ?? 0);
      }
    }
  }
  for (const { sequenceIndex, period, completed: participants, pairs: both } of completed) {
    const condition = sequences[sequenceIndex]?.[period - 1] ?? -1;
    const row = byPeriod[condition];
    if (row !== undefined) {
      row.completed[period - 1] = (row.completed[period - 1] ?? 0) + participants;
    }
    const pair = pairs[sequences[sequenceIndex]?.[period - 2] ?? -1]?.[condition];
    if (pair !== undefined) pair.completed += both;
  }
  return { conditionByPeriod: byPeriod, orderedPairs: pairs.flat() };
}
