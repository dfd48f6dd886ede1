import type { Actor } from '#platform/call.ts';
import { Requester } from './schemas.ts';

/** Who asked for the analysis, as kept with it. */
export function requesterOf(row: { readonly requestedBy: string }): Actor {
  return Requester.parse(JSON.parse(row.requestedBy));
}
