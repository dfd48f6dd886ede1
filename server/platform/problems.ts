/**
 * Every problem type the API answers with: one table, from which the problem pages, the OpenAPI
 * document and the SDK's union are made. RFC 9457.
 */
export const problems = {
  'invalid-request': { status: 400, title: 'The request is not valid' },
  'missing-idempotency-key': { status: 400, title: 'This request needs an Idempotency-Key' },
  'missing-operator': { status: 400, title: 'A station must name its operator' },
  'not-authenticated': { status: 401, title: 'A valid bearer token is needed' },
  'not-permitted': { status: 403, title: 'The role of this token may not do this' },
  'not-found': { status: 404, title: 'There is no such thing here' },
  'not-acceptable': { status: 406, title: 'None of the accepted media types can be given' },
  'already-exists': { status: 409, title: 'Something with this name exists already' },
  'idempotency-key-reused': { status: 409, title: 'This Idempotency-Key was used differently' },
  'revision-conflict': { status: 409, title: 'The draft was changed in the meantime' },
  'no-draft': { status: 409, title: 'The study has no draft' },
  'protocol-not-registrable': { status: 422, title: 'The protocol cannot be registered' },
  'reason-needed': { status: 422, title: 'A reason must be given' },
  'wrong-state': { status: 409, title: 'The study is not in a state that allows this' },
  'account-closed': { status: 409, title: 'The account is closed' },
  'site-not-in-study': { status: 409, title: 'The site takes no part in the current protocol' },
  'site-full': { status: 409, title: 'The site has issued all the slots it planned' },
  'participant-known': { status: 409, title: 'A participant with this code has arrived already' },
  'participant-unknown': { status: 404, title: 'No participant with this code is known here' },
  'participant-ended': { status: 409, title: 'The participant has withdrawn or was voided' },
  'participant-erased': { status: 410, title: 'The participant was erased' },
  'code-not-pseudonymous': { status: 422, title: 'The code looks like a contact detail' },
  'code-check-failed': { status: 422, title: 'The check character of the code does not hold' },
  'stratum-unknown': { status: 422, title: 'The protocol has no such stratum' },
  'period-not-due': { status: 409, title: 'This period is not due yet' },
  'period-already-started': { status: 409, title: 'This period was started already' },
  'has-data': { status: 409, title: 'Data were recorded already' },
  'upload-refused': { status: 422, title: 'No row of the upload was stored' },
  'correction-not-possible': { status: 409, title: 'There is no such trial to correct' },
  'analysis-finished': { status: 409, title: 'The analysis has ended already' },
  'snapshot-erased': { status: 410, title: 'Data under this report were erased since' },
  'report-altered': { status: 500, title: 'The report is no longer what was filed' },
  'payload-too-large': { status: 413, title: 'The request body is too large' },
  'unsupported-media-type': { status: 415, title: 'The media type of the body is not read here' },
  'too-many-requests': { status: 429, title: 'Too many requests' },
  'internal-error': { status: 500, title: 'Something went wrong inside the service' },
  'not-ready': { status: 503, title: 'The service is not ready' },
} as const satisfies Record<string, { status: number; title: string }>;

export type ProblemType = keyof typeof problems;

/** The names of the table, in its order. */
export const PROBLEM_TYPES = Object.keys(problems).filter(isProblemType);

function isProblemType(name: string): name is ProblemType {
  return Object.hasOwn(problems, name);
}

/** One fault of a request: where (RFC 6901 pointer), what, and what was expected instead. */
export interface Fault {
  readonly pointer: string;
  readonly code: string;
  readonly message: string;
  readonly expected?: string;
  readonly received?: string;
  /** Row of an upload, from 1, when the fault lies in one. */
  readonly row?: number;
}

export interface ProblemDetails {
  readonly type: string;
  readonly title: string;
  readonly status: number;
  readonly detail: string;
  readonly instance: string;
  readonly faults?: readonly Fault[];
}

/** An expected refusal, a bad request or a broken rule; answered as RFC 9457. */
export class ProblemError extends Error {
  override readonly name = 'ProblemError';
  readonly problem: ProblemType;
  readonly faults: readonly Fault[] | undefined;
  readonly headers: Readonly<Record<string, string>>;

  constructor(
    problem: ProblemType,
    detail: string,
    options: { faults?: readonly Fault[]; headers?: Record<string, string> } = {},
  ) {
    super(detail);
    this.problem = problem;
    this.faults = options.faults;
    this.headers = options.headers ?? {};
  }

  get status(): number {
    return problems[this.problem].status;
  }

  details(requestId: string): ProblemDetails {
    return {
      type: problemPath(this.problem),
      title: problems[this.problem].title,
      status: this.status,
      detail: this.message,
      instance: `/requests/${requestId}`,
      ...(this.faults === undefined ? {} : { faults: this.faults }),
    };
  }
}

/** The stable URI reference of a problem type; its page is served at this path. */
export function problemPath(problem: ProblemType): string {
  return `/problems/${problem}`;
}
