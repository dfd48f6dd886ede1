import type { components } from './generated/api.ts';

/** Problem details (RFC 9457) as the service sends them. */
export type Problem = components['schemas']['Problem'];

/** One fault of a request: the JSON pointer to it, a code, and for uploads the row. */
export type Fault = NonNullable<Problem['faults']>[number];

type TypeName<Path> = Path extends `/problems/${infer Name}` ? Name : never;

/** Every kind of problem that the service answers with. */
export type ProblemType = TypeName<Problem['type']>;

/** The service refused a request and said why. */
export class ProblemError extends Error {
  override readonly name = 'ProblemError';
  /** What kind of problem. A service newer than this client may answer with kinds it lacks. */
  readonly type: ProblemType;
  readonly title: string;
  readonly status: number;
  readonly detail: string;
  /** Names the request in the service's log. */
  readonly instance: string;
  /** Each thing that is wrong, where the service named them; empty otherwise. */
  readonly faults: readonly Fault[];

  constructor(problem: Problem) {
    super(`${problem.title}: ${problem.detail}`);
    this.type = problem.type.replace(/^.*\//, '') as ProblemType;
    this.title = problem.title;
    this.status = problem.status;
    this.detail = problem.detail;
    this.instance = problem.instance;
    this.faults = problem.faults ?? [];
  }

  /** The problem details again, as they came. */
  toProblem(): Problem {
    const { title, status, detail, instance, faults } = this;
    const type: Problem['type'] = `/problems/${this.type}`;
    return {
      type,
      title,
      status,
      detail,
      instance,
      ...(faults.length > 0 ? { faults: [...faults] } : {}),
    };
  }
}

/** No answer came: the link is down, was cut, or the time ran out; after all tries. */
export class NetworkError extends Error {
  override readonly name = 'NetworkError';
  /** How often the request was tried. */
  readonly attempts: number;

  constructor(message: string, options: { attempts: number; cause: unknown }) {
    super(message, { cause: options.cause });
    this.attempts = options.attempts;
  }
}

/** Something answered that is not the service, such as a proxy's own page. */
export class UnreadableAnswerError extends Error {
  override readonly name = 'UnreadableAnswerError';
  readonly status: number;

  constructor(status: number, message: string) {
    super(message);
    this.status = status;
  }
}

/** Is this the refusal of that kind? `if (isProblem(error, 'participant-known')) …` */
export function isProblem<Type extends ProblemType>(
  error: unknown,
  ...types: readonly [Type, ...Type[]]
): error is ProblemError & { readonly type: Type } {
  return error instanceof ProblemError && types.some((type) => type === error.type);
}

/** The error that an answer with a status of 400 or more stands for. */
export function errorOf(status: number, text: string): ProblemError | UnreadableAnswerError {
  const problem = parsed(text);
  if (problem !== null) return new ProblemError(problem);
  const start = text.slice(0, 120).replaceAll(/\s+/g, ' ');
  return new UnreadableAnswerError(status, `Status ${status} without problem details: ${start}`);
}

function parsed(text: string): Problem | null {
  try {
    const value: unknown = JSON.parse(text);
    return isProblemDocument(value) ? value : null;
  } catch {
    return null;
  }
}

function isProblemDocument(value: unknown): value is Problem {
  if (typeof value !== 'object' || value === null) return false;
  const { type, title, status, detail } = value as Partial<Record<keyof Problem, unknown>>;
  return (
    typeof type === 'string' &&
    typeof title === 'string' &&
    typeof status === 'number' &&
    typeof detail === 'string'
  );
}
