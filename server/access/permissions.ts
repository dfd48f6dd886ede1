import { ROLES, type Role } from '#platform/call.ts';

/**
 * Who may do what: one line an operation of openapi.yaml. The guard reads this table before every
 * request; a test walks every operation with every role and compares.
 *
 * A role only opens the door. What is behind it is bounded by the token's place: a study lead acts
 * in one lab, a coordinator at one site, a station for its own site; anything else answers 404.
 * Roles that check people in see no counts by sequence, no coming slot and no value by condition.
 */
export const permissions = {
  // access
  createLab: ['administrator'],
  listLabs: ['administrator', 'study-lead', 'analyst', 'auditor'],
  createSite: ['administrator', 'study-lead'],
  listSites: ['administrator', 'study-lead', 'site-coordinator', 'analyst', 'auditor'],
  createStation: ['administrator', 'study-lead', 'site-coordinator'],
  listStations: ['administrator', 'study-lead', 'site-coordinator', 'auditor'],
  createAccount: ['administrator', 'study-lead'],
  listAccounts: ['administrator', 'study-lead', 'auditor'],
  closeAccount: ['administrator', 'study-lead'],
  createToken: ['administrator', 'study-lead', 'site-coordinator'],
  listTokens: ['administrator', 'study-lead', 'site-coordinator', 'auditor'],
  revokeToken: ['administrator', 'study-lead', 'site-coordinator'],
  getOwnToken: ROLES,

  // audit
  getAuditPublicKey: ROLES,
  listAuditEntries: ['administrator', 'study-lead', 'auditor'],
  makeCheckpoint: ['administrator', 'study-lead', 'auditor'],
  listCheckpoints: ['administrator', 'study-lead', 'auditor'],
  verifyAudit: ['administrator', 'study-lead', 'auditor'],

  // studies
  createStudy: ['study-lead'],
  listStudies: ROLES,
  getStudy: ROLES,
  getProtocolDraft: ['study-lead', 'analyst', 'auditor'],
  putProtocolDraft: ['study-lead'],
  checkProtocolDraft: ['study-lead', 'analyst'],
  registerProtocol: ['study-lead'],
  listProtocolVersions: ['study-lead', 'site-coordinator', 'analyst', 'auditor'],
  getProtocolVersion: ['study-lead', 'site-coordinator', 'analyst', 'auditor'],
  previewScheme: ['study-lead', 'analyst'],
  pauseStudy: ['study-lead'],
  resumeStudy: ['study-lead'],
  closeStudy: ['study-lead'],
  getAllocationSecret: ['study-lead', 'auditor'],

  // allocations
  recordArrival: ['station'],
  getDuePeriod: ['station'],
  startPeriod: ['station'],
  recordWithdrawal: ['station', 'site-coordinator', 'study-lead'],
  voidArrival: ['site-coordinator', 'study-lead'],
  listParticipants: ['site-coordinator', 'study-lead', 'auditor'],
  getParticipant: ['site-coordinator', 'study-lead', 'auditor'],
  getBalance: ['study-lead', 'analyst', 'auditor'],
  replayAllocations: ['study-lead', 'auditor'],
  estimatePredictability: ['study-lead', 'analyst'],

  // trials
  uploadTrials: ['station'],
  listUploads: ['site-coordinator', 'study-lead', 'auditor'],
  getUpload: ['station', 'site-coordinator', 'study-lead', 'auditor'],
  listRefusedRows: ['station', 'site-coordinator', 'study-lead'],
  correctTrial: ['site-coordinator', 'study-lead'],
  exportTrials: ['study-lead', 'analyst'],
  eraseParticipant: ['study-lead'],

  // analyses and reports
  requestAnalysis: ['study-lead', 'analyst'],
  listAnalyses: ['study-lead', 'analyst', 'auditor'],
  getAnalysis: ['study-lead', 'analyst', 'auditor'],
  followAnalysis: ['study-lead', 'analyst', 'auditor'],
  cancelAnalysis: ['study-lead', 'analyst'],
  listReports: ['study-lead', 'analyst', 'auditor'],
  getReport: ['study-lead', 'analyst', 'auditor'],
  getReportBody: ['study-lead', 'analyst', 'auditor'],
  getReportPage: ['study-lead', 'analyst', 'auditor'],
  recomputeReport: ['study-lead', 'analyst', 'auditor'],
} as const satisfies Record<string, readonly Role[]>;

export type Operation = keyof typeof permissions;

export function isOperation(name: string): name is Operation {
  return Object.hasOwn(permissions, name);
}

/** May a token of this role do this operation at all? */
export function permits(role: Role, operation: string): boolean {
  return rolesOf(operation).includes(role);
}

/** The roles that may do an operation; none for an operation that does not exist. */
export function rolesOf(operation: string): readonly Role[] {
  return isOperation(operation) ? permissions[operation] : [];
}
