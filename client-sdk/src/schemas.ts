import type { components } from './generated/api.ts';

type Schemas = components['schemas'];

export type Lab = Schemas['Lab'];
export type Site = Schemas['Site'];
export type Station = Schemas['Station'];
export type Account = Schemas['Account'];
export type Token = Schemas['Token'];
/** A token just made; `token` is the secret, given this once. */
export type CreatedToken = Schemas['CreatedToken'];
/** One shape a role, so that a place that does not fit a role cannot be written. */
export type NewToken = Schemas['CreateTokenBody'];

export type StudyDetails = Schemas['Study'];
/** The protocol as a document: what is drafted, checked and registered. */
export type ProtocolDocument = Schemas['ProtocolDocument'];
export type ProtocolDraft = Schemas['ProtocolDraft'];
export type ProtocolDraftRevision = Schemas['ProtocolDraftRevision'];
export type ProtocolDraftCheck = Schemas['ProtocolDraftCheck'];
export type ProtocolVersion = Schemas['ProtocolVersion'];
export type ProtocolVersionSummary = Schemas['ProtocolVersionSummary'];
export type SchemePreview = Schemas['SchemePreview'];
export type SchemePreviewRequest = Schemas['SchemePreviewBody'];
export type AllocationSecret = Schemas['AllocationSecret'];
export type Condition = Schemas['Condition'];
export type Washout = Schemas['Washout'];

/** Somebody new, with a code or without one, or somebody who returns. */
export type ArrivalRequest = Schemas['ArrivalBody'];
export type Arrival = Schemas['Arrival'];
export type DuePeriod = Schemas['DuePeriod'];
export type PeriodStartRequest = Schemas['PeriodStartBody'];
export type PeriodStart = Schemas['PeriodStart'];
export type WithdrawalRequest = Schemas['WithdrawalBody'];
export type Participant = Schemas['Participant'];
export type Balance = Schemas['Balance'];
export type AllocationReplay = Schemas['AllocationReplay'];

export type AnalysisDetails = Schemas['Analysis'];
export type ReportSummary = Schemas['ReportSummary'];
export type ReportDetails = Schemas['Report'];
export type Recomputation = Schemas['Recomputation'];

export type AuditEntry = Schemas['AuditEntry'];
export type Checkpoint = Schemas['Checkpoint'];
export type KeptCheckpoint = Schemas['KeptCheckpoint'];
export type Verification = Schemas['Verification'];
export type AuditPublicKey = Schemas['AuditPublicKey'];

/** One trial as a station reports it; `values` and `missing` are by measure key. */
export type TrialRow = Schemas['TrialRow'];
export type Upload = Schemas['Upload'];
export type UploadSummary = Schemas['UploadSummary'];
export type UploadFault = Schemas['UploadFault'];
export type RefusedRow = Schemas['RefusedRow'];
export type TrialCorrectionRequest = Schemas['TrialCorrectionBody'];
export type TrialCorrection = Schemas['TrialCorrection'];
export type ExportedTrial = Schemas['ExportedTrial'];
export type ErasureRequest = Schemas['ErasureBody'];
export type Erasure = Schemas['Erasure'];
