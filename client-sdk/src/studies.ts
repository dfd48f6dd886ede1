import { answered, type Connection } from './connection.ts';
import { Pages } from './pages.ts';
import { pageQuery } from './places.ts';
import type { SchemePreview, SchemePreviewRequest, StudyDetails } from './schemas.ts';
import { Study } from './study.ts';

/** Studies: registered, enrolling, closed. */
export class Studies {
  readonly #connection: Connection;

  constructor(connection: Connection) {
    this.#connection = connection;
  }

  /** Creates a study of the study lead's own lab; it has no protocol yet. */
  async create(study: { name: string }): Promise<Study> {
    const { id } = await answered(this.#connection.api.POST('/v1/studies', { body: study }));
    return new Study(this.#connection, id);
  }

  /**
   * @throws {ProblemError} `not-found` when the token cannot see such a study
   */
  async get(studyId: string): Promise<Study> {
    const study = new Study(this.#connection, studyId);
    await study.details();
    return study;
  }

  list(): Pages<StudyDetails> {
    return new Pages((cursor) =>
      answered(this.#connection.api.GET('/v1/studies', { params: { query: pageQuery(cursor) } })),
    );
  }

  /** What a scheme would make: sequences, counts, and how many participants fill whole blocks. */
  previewScheme(request: SchemePreviewRequest): Promise<SchemePreview> {
    return answered(this.#connection.api.POST('/v1/scheme-previews', { body: request }));
  }
}
