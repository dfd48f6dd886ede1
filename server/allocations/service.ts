import type { Call } from '#platform/call.ts';
import type { Database } from '#platform/database.ts';
import type { PageQuery } from '#platform/paging.ts';
import { recordArrival } from './arrivals.ts';
import { getBalance } from './balance.ts';
import { recordWithdrawal, voidArrival } from './endings.ts';
import { getParticipant, listParticipants } from './participants.ts';
import { getDuePeriod, startPeriod } from './periods.ts';
import { createPredictabilityEstimator } from './predictability.ts';
import { replayAllocations } from './replays.ts';
import type { ArrivalBody, PeriodStartBody, VoidBody, WithdrawalBody } from './schemas.ts';

export {
  codeKeyOf,
  eraseParticipantRecords,
  findParticipants,
  type KnownParticipant,
  markPeriodsBegun,
  markPeriodsCompleted,
  type ParticipantRecord,
  participantCodes,
  participantRecords,
  requireParticipant,
} from './participants.ts';

export type AllocationsService = ReturnType<typeof createAllocationsService>;

/** Arrivals, periods, withdrawals, the view of balance, the replay and predictability. */
export function createAllocationsService(database: Database) {
  return {
    recordArrival: (call: Call, studyId: string, body: ArrivalBody) =>
      recordArrival(database, call, studyId, body),

    getDuePeriod: (call: Call, studyId: string, code: string) =>
      getDuePeriod(database, call, studyId, code),

    startPeriod: (call: Call, studyId: string, code: string, body: PeriodStartBody) =>
      startPeriod(database, call, studyId, code, body),

    recordWithdrawal: (call: Call, studyId: string, code: string, body: WithdrawalBody) =>
      recordWithdrawal(database, call, studyId, code, body),

    voidArrival: (call: Call, studyId: string, code: string, body: VoidBody) =>
      voidArrival(database, call, studyId, code, body),

    listParticipants: (call: Call, studyId: string, query: PageQuery) =>
      listParticipants(database, call, studyId, query),

    getParticipant: (call: Call, studyId: string, code: string) =>
      getParticipant(database, call, studyId, code),

    getBalance: (call: Call, studyId: string, protocolVersion: number | undefined) =>
      getBalance(database, call, studyId, protocolVersion),

    replayAllocations: (call: Call, studyId: string) => replayAllocations(database, call, studyId),

    estimatePredictability: createPredictabilityEstimator(),
  };
}
