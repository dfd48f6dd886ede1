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
export type AuditEntry = Schemas['AuditEntry'];
export type Checkpoint = Schemas['Checkpoint'];
export type KeptCheckpoint = Schemas['KeptCheckpoint'];
export type Verification = Schemas['Verification'];
export type AuditPublicKey = Schemas['AuditPublicKey'];
