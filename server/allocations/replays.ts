import type { AllocationPlan } from '#core/allocation/ledger.ts';
import { replayAllocations as replay } from '#core/allocation/replay.ts';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, sqlExecutor } from '#platform/database.ts';
import { ProblemError } from '#platform/problems.ts';
import { appendEntry } from '#server/audit/log.ts';
import {
  allocationSecretOf,
  lockVisibleStudy,
  readRegisteredProtocol,
} from '#server/studies/service.ts';
import { allocationPlanOf } from './allocation-plan.ts';
import type { ReplayResponse } from './schemas.ts';
import * as store from './store-slots.ts';

/**
 * Recomputes every allocation of a closed study from its secret and its registered protocols, read
 * anew, and says where the record first differs. Audit event `allocations-replayed`.
 *
 * @throws {ProblemError} `not-found`, `wrong-state` before the study is closed
 */
export function replayAllocations(
  database: Database,
  call: Call,
  studyId: string,
): Promise<ReplayResponse> {
  return database.inSqlTransaction(async (tx) => {
    const executor = sqlExecutor(tx);
    const study = await lockVisibleStudy(executor, call.principal, studyId);
    const { secretHash, currentVersion, slotsIssued } = study;
    if (study.state !== 'closed' || secretHash === null || currentVersion === null) {
      throw new ProblemError('wrong-state', 'Allocations are replayed once the study is closed.');
    }
    const plans = new Map<number, AllocationPlan>();
    for (let number = 1; number <= currentVersion; number += 1) {
      const registered = await readRegisteredProtocol(executor, study.id, number);
      plans.set(number, allocationPlanOf(registered));
    }
    const { verified, firstDifference } = replay({
      studyId: study.id,
      secret: await allocationSecretOf(executor, study.id),
      secretHash,
      plans,
      slots: await store.selectSlots(tx, study.id),
      slotsIssued,
    });
    const agrees = firstDifference === null;
    await appendEntry(executor, {
      chain: study.id,
      actor: actorOf(call),
      action: 'allocations-replayed',
      subject: study.id,
      details: { agrees, slotsIssued, verified },
      at: call.now,
    });
    return {
      agrees,
      verified,
      slotsIssued,
      secretHash,
      firstDifference:
        firstDifference === null
          ? null
          : {
              ...firstDifference,
              expected: String(firstDifference.expected),
              recorded: String(firstDifference.recorded),
            },
    };
  });
}
