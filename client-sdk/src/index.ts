export { Analysis, AnalysisEndedError, type WaitOptions } from './analysis.ts';
export { Audit } from './audit.ts';
export { Connection, type FairturnOptions, type PlainRequest } from './connection.ts';
export { Fairturn } from './fairturn.ts';
export {
  type FlushOutcome,
  type HasConnection,
  Outbox,
  type OutboxMessage,
  type OutboxOptions,
} from './outbox.ts';
export {
  type KeyValueStore,
  memoryStore,
  type OutboxItem,
  type OutboxStorage,
  outboxIn,
} from './outbox-storage.ts';
export { type Page, Pages } from './pages.ts';
export { Accounts, Labs, Sites, Stations, Tokens } from './places.ts';
export {
  type Fault,
  isProblem,
  NetworkError,
  type Problem,
  ProblemError,
  type ProblemType,
  UnreadableAnswerError,
} from './problems.ts';
export { Report } from './report.ts';
export { DEFAULT_RETRY, type RetryPolicy } from './retry.ts';
export type * from './schemas.ts';
export {
  type BookedDuePeriod,
  type Delivery,
  NotInBookError,
  StationBook,
  type StationBookOptions,
} from './station-book.ts';
export { Studies } from './studies.ts';
export { Study } from './study.ts';
export { ExportCutError, type ExportOptions } from './trial-export.ts';
export type { UploadOptions, UploadOutcome, UploadProgress } from './uploads.ts';
