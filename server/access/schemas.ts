import { z } from 'zod';
import { ROLES } from '#platform/call.ts';
import { PageQuery, pageOf } from '#platform/paging.ts';
import { writtenText } from '#platform/text.ts';

const Name = writtenText(120);

/** In lower case, as ids are kept and compared. */
const Id = z.uuid().toLowerCase();

export const LabParams = z.strictObject({ labId: Id });
export const SiteParams = z.strictObject({ siteId: Id });
export const AccountParams = z.strictObject({ accountId: Id });
export const TokenParams = z.strictObject({ tokenId: Id });

export const CreateLabBody = z.strictObject({ name: Name }).meta({ id: 'CreateLabBody' });
export type CreateLabBody = z.infer<typeof CreateLabBody>;

export const LabResponse = z
  .strictObject({ id: z.uuid(), name: z.string(), createdAt: z.iso.datetime() })
  .meta({ id: 'Lab' });
export type LabResponse = z.infer<typeof LabResponse>;
export const LabPage = pageOf(LabResponse).meta({ id: 'LabPage' });

export const CreateSiteBody = z.strictObject({ name: Name }).meta({ id: 'CreateSiteBody' });
export type CreateSiteBody = z.infer<typeof CreateSiteBody>;

export const SiteResponse = z
  .strictObject({ id: z.uuid(), labId: z.uuid(), name: z.string(), createdAt: z.iso.datetime() })
  .meta({ id: 'Site' });
export type SiteResponse = z.infer<typeof SiteResponse>;
export const SitePage = pageOf(SiteResponse).meta({ id: 'SitePage' });

export const CreateStationBody = z.strictObject({ name: Name }).meta({ id: 'CreateStationBody' });
export type CreateStationBody = z.infer<typeof CreateStationBody>;

export const StationResponse = z
  .strictObject({ id: z.uuid(), siteId: z.uuid(), name: z.string(), createdAt: z.iso.datetime() })
  .meta({ id: 'Station' });
export type StationResponse = z.infer<typeof StationResponse>;
export const StationPage = pageOf(StationResponse).meta({ id: 'StationPage' });

export const CreateAccountBody = z
  .strictObject({
    name: Name,
    labId: Id.nullable().describe('Null for people of the service itself'),
  })
  .meta({ id: 'CreateAccountBody' });
export type CreateAccountBody = z.infer<typeof CreateAccountBody>;

export const AccountResponse = z
  .strictObject({
    id: z.uuid(),
    labId: z.uuid().nullable(),
    name: z.string(),
    createdAt: z.iso.datetime(),
    closedAt: z.iso.datetime().nullable(),
  })
  .meta({ id: 'Account' });
export type AccountResponse = z.infer<typeof AccountResponse>;
export const AccountPage = pageOf(AccountResponse).meta({ id: 'AccountPage' });

const Lifetime = z
  .int()
  .min(60)
  .max(5 * 366 * 86_400)
  .describe('Seconds until the token expires');

/** One shape a role, so that a place that does not fit its role cannot be written down. */
export const CreateTokenBody = z
  .discriminatedUnion('role', [
    z.strictObject({
      role: z.literal('administrator'),
      accountId: Id,
      label: Name,
      lifetimeSeconds: Lifetime,
    }),
    z.strictObject({
      role: z.literal('study-lead'),
      accountId: Id,
      labId: Id,
      label: Name,
      lifetimeSeconds: Lifetime,
    }),
    z.strictObject({
      role: z.literal('analyst'),
      accountId: Id,
      labId: Id,
      label: Name,
      lifetimeSeconds: Lifetime,
    }),
    z.strictObject({
      role: z.literal('auditor'),
      accountId: Id,
      labId: Id.nullable().describe('Null audits the whole service'),
      label: Name,
      lifetimeSeconds: Lifetime,
    }),
    z.strictObject({
      role: z.literal('site-coordinator'),
      accountId: Id,
      siteId: Id,
      label: Name,
      lifetimeSeconds: Lifetime,
    }),
    z.strictObject({
      role: z.literal('station'),
      stationId: Id,
      label: Name,
      lifetimeSeconds: Lifetime,
    }),
  ])
  .meta({ id: 'CreateTokenBody' });
export type CreateTokenBody = z.infer<typeof CreateTokenBody>;

const tokenFields = {
  id: z.uuid(),
  role: z.enum(ROLES),
  accountId: z.uuid().nullable(),
  labId: z.uuid().nullable(),
  siteId: z.uuid().nullable(),
  stationId: z.uuid().nullable(),
  label: z.string(),
  createdAt: z.iso.datetime(),
  expiresAt: z.iso.datetime(),
  revokedAt: z.iso.datetime().nullable(),
};

export const TokenResponse = z.strictObject(tokenFields).meta({ id: 'Token' });
export type TokenResponse = z.infer<typeof TokenResponse>;
export const TokenPage = pageOf(TokenResponse).meta({ id: 'TokenPage' });

export const CreatedTokenResponse = z
  .strictObject({
    ...tokenFields,
    token: z
      .string()
      .nullable()
      .describe('Shown this once; null when an idempotent repeat answers again'),
  })
  .meta({ id: 'CreatedToken' });
export type CreatedTokenResponse = z.infer<typeof CreatedTokenResponse>;

export const SiteListQuery = z.strictObject({
  ...PageQuery.shape,
  labId: Id.optional(),
});
