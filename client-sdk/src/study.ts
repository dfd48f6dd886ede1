import { Analysis } from './analysis.ts';
import { answered, type Connection } from './connection.ts';
import { Pages } from './pages.ts';
import { pageQuery } from './places.ts';
import { isProblem } from './problems.ts';
import type * as shapes from './schemas.ts';
import { type ExportOptions, exportedTrials, exportStream } from './trial-export.ts';
import { type UploadOptions, type UploadOutcome, uploadRows } from './uploads.ts';

/**
 * One study. Whatever it does is bounded by the token's role and place: a lead registers and
 * analyses, a station checks in and uploads.
 */
export class Study {
  readonly id: string;
  readonly #connection: Connection;

  constructor(connection: Connection, id: string) {
    this.#connection = connection;
    this.id = id;
  }

  /** Name, state, version in force. */
  details(): Promise<shapes.StudyDetails> {
    return answered(this.#api.GET('/v1/studies/{studyId}', { params: this.#params }));
  }

  // ---- protocol

  /** @throws {ProblemError} `no-draft` */
  draft(): Promise<shapes.ProtocolDraft> {
    const path = '/v1/studies/{studyId}/protocol-draft';
    return answered(this.#api.GET(path, { params: this.#params }));
  }

  /**
   * Saves a draft, which may still have faults.
   *
   * @param options.revision the revision that this draft replaces; 0, the default, for the first
   * @throws {ProblemError} `revision-conflict` when somebody else saved in the meantime
   */
  async saveDraft(
    protocol: shapes.ProtocolDocument,
    { revision = 0 }: { revision?: number } = {},
  ): Promise<shapes.ProtocolDraftRevision> {
    const path = '/v1/studies/{studyId}/protocol-draft';
    const body = { protocol, revision };
    try {
      return await answered(this.#api.PUT(path, { params: this.#params, body }));
    } catch (error) {
      // After a lost answer the repeat finds its own first try: that draft is the one wanted.
      if (!isProblem(error, 'revision-conflict')) throw error;
      const saved = await this.draft();
      if (saved.revision !== revision + 1 || !isSameJson(saved.protocol, protocol)) throw error;
      return { number: saved.number, revision: saved.revision };
    }
  }

  /** Everything that stands against registering the draft. */
  checkDraft(): Promise<shapes.ProtocolDraftCheck> {
    const path = '/v1/studies/{studyId}/protocol-draft/check';
    return answered(this.#api.POST(path, { params: this.#params }));
  }

  /**
   * Registers the draft: fixes it, hashes it, and opens enrolment with version 1.
   *
   * @param request.reason why the protocol is amended; needed from version 2 on
   * @throws {ProblemError} `protocol-not-registrable` with every fault
   */
  register(request: { revision: number; reason?: string }): Promise<shapes.ProtocolVersion> {
    const path = '/v1/studies/{studyId}/protocol-versions';
    return answered(this.#api.POST(path, { params: this.#params, body: request }));
  }

  versions(): Pages<shapes.ProtocolVersionSummary> {
    const path = '/v1/studies/{studyId}/protocol-versions';
    return new Pages((cursor) =>
      answered(this.#api.GET(path, { params: { ...this.#params, query: pageQuery(cursor) } })),
    );
  }

  version(number: number): Promise<shapes.ProtocolVersion> {
    const path = '/v1/studies/{studyId}/protocol-versions/{number}';
    return answered(this.#api.GET(path, { params: { path: { studyId: this.id, number } } }));
  }

  // ---- state

  /** Takes nobody new for a while. */
  pause(change: { reason?: string } = {}): Promise<shapes.StudyDetails> {
    const path = '/v1/studies/{studyId}/pause';
    return answered(this.#api.POST(path, { params: this.#params, body: change }));
  }

  resume(change: { reason?: string } = {}): Promise<shapes.StudyDetails> {
    const path = '/v1/studies/{studyId}/resume';
    return answered(this.#api.POST(path, { params: this.#params, body: change }));
  }

  /** Ends enrolment for good; those under way may finish. */
  close(change: { reason?: string } = {}): Promise<shapes.StudyDetails> {
    const path = '/v1/studies/{studyId}/closure';
    return answered(this.#api.POST(path, { params: this.#params, body: change }));
  }

  /** The allocation secret, once the study is closed; asking is logged. */
  allocationSecret(): Promise<shapes.AllocationSecret> {
    const path = '/v1/studies/{studyId}/allocation-secret';
    return answered(this.#api.GET(path, { params: this.#params }));
  }

  // ---- participants

  /**
   * Checks a participant in. Somebody new gets the next slot and its sequence; without a code, the
   * service issues one.
   *
   * @throws {ProblemError} `participant-known` when the code is in use already, `site-full`, …
   */
  arrive(arrival: shapes.ArrivalRequest): Promise<shapes.Arrival> {
    const path = '/v1/studies/{studyId}/arrivals';
    return answered(this.#api.POST(path, { params: this.#params, body: arrival }));
  }

  /** Which period is due for a participant, with which condition, from when until when. */
  due(code: string): Promise<shapes.DuePeriod> {
    const path = '/v1/studies/{studyId}/participants/{code}/due';
    return answered(this.#api.GET(path, { params: this.#participant(code) }));
  }

  /**
   * Notes that a period begins.
   *
   * @throws {ProblemError} `period-not-due` out of turn or outside the washout's bounds, unless the
   *   start is reported as a deviation with a reason
   */
  startPeriod(code: string, start: shapes.PeriodStartRequest): Promise<shapes.PeriodStart> {
    const path = '/v1/studies/{studyId}/participants/{code}/period-starts';
    return answered(this.#api.POST(path, { params: this.#participant(code), body: start }));
  }

  withdraw(code: string, withdrawal: shapes.WithdrawalRequest): Promise<shapes.Participant> {
    const path = '/v1/studies/{studyId}/participants/{code}/withdrawal';
    return answered(this.#api.POST(path, { params: this.#participant(code), body: withdrawal }));
  }

  /** Undoes a check-in that was a mistake, before anything was begun. */
  voidArrival(code: string, { reason }: { reason: string }): Promise<shapes.Participant> {
    const path = '/v1/studies/{studyId}/participants/{code}/void';
    return answered(this.#api.POST(path, { params: this.#participant(code), body: { reason } }));
  }

  participants(): Pages<shapes.Participant> {
    const path = '/v1/studies/{studyId}/participants';
    return new Pages((cursor) =>
      answered(this.#api.GET(path, { params: { ...this.#params, query: pageQuery(cursor) } })),
    );
  }

  participant(code: string): Promise<shapes.Participant> {
    const path = '/v1/studies/{studyId}/participants/{code}';
    return answered(this.#api.GET(path, { params: this.#participant(code) }));
  }

  /** How slots are spread over sites, sequences, periods and ordered pairs. */
  balance(query: { protocolVersion?: number } = {}): Promise<shapes.Balance> {
    const path = '/v1/studies/{studyId}/balance';
    return answered(this.#api.GET(path, { params: { ...this.#params, query } }));
  }

  /** Recomputes every allocation of the closed study from its secret. */
  replayAllocations(): Promise<shapes.AllocationReplay> {
    const path = '/v1/studies/{studyId}/replays';
    return answered(this.#api.POST(path, { params: this.#params }));
  }

  // ---- trials

  /**
   * Uploads trials from any source, once each: rows that are there already with the same values are
   * counted as repeated.
   *
   * @throws {ProblemError} `upload-refused` when it is all or nothing and a row has a fault
   */
  upload(
    rows: Iterable<shapes.TrialRow> | AsyncIterable<shapes.TrialRow>,
    options: UploadOptions = {},
  ): Promise<UploadOutcome> {
    return uploadRows(this.#connection, this.id, rows, options);
  }

  uploads(): Pages<shapes.UploadSummary> {
    const path = '/v1/studies/{studyId}/uploads';
    return new Pages((cursor) =>
      answered(this.#api.GET(path, { params: { ...this.#params, query: pageQuery(cursor) } })),
    );
  }

  /** What became of one upload. */
  uploaded(uploadId: string): Promise<shapes.Upload> {
    const path = '/v1/studies/{studyId}/uploads/{uploadId}';
    return answered(this.#api.GET(path, { params: { path: { studyId: this.id, uploadId } } }));
  }

  /** The rows of an upload that were refused, as they came, each with its faults. */
  refusedRows(uploadId: string): Pages<shapes.RefusedRow> {
    const path = '/v1/studies/{studyId}/uploads/{uploadId}/refused-rows';
    return new Pages((cursor) => {
      const params = { path: { studyId: this.id, uploadId }, query: pageQuery(cursor) };
      return answered(this.#api.GET(path, { params }));
    });
  }

  /** Corrects a stored trial; the original stays beside the correction. */
  correctTrial(correction: shapes.TrialCorrectionRequest): Promise<shapes.TrialCorrection> {
    const path = '/v1/studies/{studyId}/trial-corrections';
    return answered(this.#api.POST(path, { params: this.#params, body: correction }));
  }

  /** The study's trials as they come from the service. An export is a look: logged and counted. */
  exportTrials(options: ExportOptions = {}): AsyncGenerator<shapes.ExportedTrial, void, undefined> {
    return exportedTrials(this.#connection, this.id, options);
  }

  /** The same as one CSV text stream (RFC 4180). */
  exportCsv(options: ExportOptions = {}): Promise<ReadableStream<Uint8Array>> {
    return exportStream(this.#connection, this.id, { ...options, mediaType: 'text/csv' });
  }

  /** Erases a participant's code and contents for good; a tombstone stays. */
  eraseParticipant(code: string, erasure: shapes.ErasureRequest): Promise<shapes.Erasure> {
    const path = '/v1/studies/{studyId}/participants/{code}/erasure';
    return answered(this.#api.POST(path, { params: this.#participant(code), body: erasure }));
  }

  // ---- analyses and reports

  /** Has the registered plan run on the data of now. Follow it with `analysis.wait()`. */
  async analyse(request: { seed?: string } = {}): Promise<Analysis> {
    const path = '/v1/studies/{studyId}/analyses';
    const details = await answered(this.#api.POST(path, { params: this.#params, body: request }));
    return new Analysis(this.#connection, details.id);
  }

  analyses(): Pages<shapes.AnalysisDetails> {
    const path = '/v1/studies/{studyId}/analyses';
    return new Pages((cursor) =>
      answered(this.#api.GET(path, { params: { ...this.#params, query: pageQuery(cursor) } })),
    );
  }

  reports(): Pages<shapes.ReportSummary> {
    const path = '/v1/studies/{studyId}/reports';
    return new Pages((cursor) =>
      answered(this.#api.GET(path, { params: { ...this.#params, query: pageQuery(cursor) } })),
    );
  }

  get #api(): Connection['api'] {
    return this.#connection.api;
  }

  get #params(): { path: { studyId: string } } {
    return { path: { studyId: this.id } };
  }

  #participant(code: string): { path: { studyId: string; code: string } } {
    return { path: { studyId: this.id, code } };
  }
}

/** Are two JSON values equal, whatever the order of their members? */
function isSameJson(one: unknown, other: unknown): boolean {
  if (typeof one !== 'object' || typeof other !== 'object' || one === null || other === null) {
    return one === other;
  }
  if (Array.isArray(one) !== Array.isArray(other)) return false;
  const ones = Object.entries(one);
  const others = new Map(Object.entries(other));
  return (
    ones.length === others.size &&
    ones.every(([name, value]) => others.has(name) && isSameJson(value, others.get(name)))
  );
}
