/** The roles a token can have. Who may do what is the table in `server/access/permissions.ts`. */
export const ROLES = [
  'administrator',
  'study-lead',
  'site-coordinator',
  'station',
  'analyst',
  'auditor',
] as const;

export type Role = (typeof ROLES)[number];

/**
 * Who is calling, as the token says: a role and a place. `labId` is null for the whole service;
 * `siteId` is set for site coordinators and stations, `stationId` for stations alone.
 */
export interface Principal {
  readonly tokenId: string;
  readonly role: Role;
  readonly accountId: string | null;
  readonly labId: string | null;
  readonly siteId: string | null;
  readonly stationId: string | null;
}

/** What a service function needs to know of the request it serves; it knows no HTTP. */
export interface Call {
  readonly principal: Principal;
  readonly requestId: string;
  /** Code of the person at the station (`Operator-Code` header); stations must send it. */
  readonly operator: string | null;
  readonly idempotency: { readonly key: string; readonly requestHash: string } | null;
  readonly now: Date;
}

/** Who did something, as audit entries and records name it. */
export interface Actor {
  readonly role: Role | 'service';
  readonly tokenId: string | null;
  readonly accountId: string | null;
  readonly stationId: string | null;
  readonly operator: string | null;
}

export function actorOf(call: Call): Actor {
  const { role, tokenId, accountId, stationId } = call.principal;
  return { role, tokenId, accountId, stationId, operator: call.operator };
}

/** The service acting on its own: first start, workers. */
export const SERVICE_ACTOR: Actor = {
  role: 'service',
  tokenId: null,
  accountId: null,
  stationId: null,
  operator: null,
};
