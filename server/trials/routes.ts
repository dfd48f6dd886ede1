import type { Readable } from 'node:stream';
import type { FastifyPluginAsync, FastifyReply, FastifyRequest } from 'fastify';
import { validatorCompiler, type ZodTypeProvider } from 'fastify-type-provider-zod';
import { z } from 'zod';
import { callOf } from '#platform/guard.ts';
import { PageQuery } from '#platform/paging.ts';
import { ProblemError } from '#platform/problems.ts';
import { exportMediaType, uploadMediaType } from './media-types.ts';
import { UPLOAD_MEDIA_TYPES } from './read-rows.ts';
import * as schemas from './schemas.ts';
import type { TrialsService } from './service.ts';

const tags = ['trials'];

export const trialsRoutes: FastifyPluginAsync<{ service: TrialsService }> = async (
  plain,
  { service },
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();
  await app.register(uploadRoute, { service });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/uploads',
    schema: {
      operationId: 'listUploads',
      tags,
      summary: 'Uploads that the token can see, in the order of receipt',
      params: schemas.StudyParams,
      querystring: PageQuery,
      response: { 200: schemas.UploadPage },
    },
    handler: (request) =>
      service.listUploads(callOf(request), request.params.studyId, request.query),
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/uploads/:uploadId',
    schema: {
      operationId: 'getUpload',
      tags,
      summary: 'One upload, with the faults of its first refused rows',
      params: schemas.UploadParams,
      response: { 200: schemas.UploadResponse },
    },
    handler: (request) =>
      service.getUpload(callOf(request), request.params.studyId, request.params.uploadId),
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/uploads/:uploadId/refused-rows',
    schema: {
      operationId: 'listRefusedRows',
      tags,
      summary: 'What an upload refused, as it came, with every fault',
      params: schemas.UploadParams,
      querystring: PageQuery,
      response: { 200: schemas.RefusedRowPage },
    },
    handler: (request) => service.listRefusedRows(callOf(request), request.params, request.query),
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/trial-corrections',
    schema: {
      operationId: 'correctTrial',
      tags,
      summary: 'Correct a trial, with a reason; what was recorded first stays as a version',
      params: schemas.StudyParams,
      body: schemas.CorrectionBody,
      response: { 201: schemas.CorrectionResponse },
    },
    handler: async (request, reply) => {
      const { studyId } = request.params;
      const answer = await service.correctTrial(callOf(request), studyId, request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/trials',
    // A HEAD would count as a look.
    exposeHeadRoute: false,
    schema: {
      operationId: 'exportTrials',
      tags,
      summary: 'All trials as CSV or NDJSON, by the Accept header; logged and counted as a look',
      description:
        'By participant in the order of arrival, period, repetition and version. Trials of ' +
        'somebody who was erased are in it as tombstones, without code, values or flags. CSV has ' +
        'one column a measure and one `missing.` column a measure for reason codes.',
      params: schemas.StudyParams,
      querystring: schemas.ExportQuery,
      response: {
        200: {
          description: 'The trials, streamed',
          content: {
            'application/x-ndjson': { schema: schemas.ExportedTrial },
            'text/csv': { schema: z.string() },
          },
        },
      },
    },
    handler: async (request, reply) => {
      const mediaType = exportMediaType(request.headers.accept);
      const { studyId } = request.params;
      const options = { mediaType, ...request.query };
      const stream = await service.exportTrials(callOf(request), studyId, options);
      return sendStream(reply, mediaType, stream);
    },
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/participants/:code/erasure',
    schema: {
      operationId: 'eraseParticipant',
      tags,
      summary: 'Erase everything personal of a participant; a tombstone stays',
      params: schemas.ErasureParams,
      body: schemas.ErasureBody,
      response: { 200: schemas.ErasureResponse },
    },
    handler: (request) => service.eraseParticipant(callOf(request), request.params, request.body),
  });
};

function sendStream(reply: FastifyReply, mediaType: string, stream: Readable): FastifyReply {
  return reply.type(`${mediaType}; charset=utf-8`).send(stream);
}

/** In a plugin of its own, so that its bodies alone stay streams, JSON too. */
const uploadRoute: FastifyPluginAsync<{ service: TrialsService }> = async (plain, { service }) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();
  app.removeAllContentTypeParsers();
  app.addContentTypeParser([...UPLOAD_MEDIA_TYPES], (_request, payload, done) => {
    done(null, payload);
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/uploads',
    config: { streamedBody: true },
    // The body is documented, but a stream: its rows are checked one by one as they are read.
    validatorCompiler: ({ httpPart, schema, ...route }) => {
      if (httpPart === 'body') return (data) => ({ value: data });
      if (!(schema instanceof z.ZodType)) throw new Error('Every schema is one of zod.');
      return validatorCompiler({ ...route, httpPart: httpPart ?? '', schema });
    },
    schema: {
      operationId: 'uploadTrials',
      tags,
      summary: 'Upload trial records of the own site, as JSON, NDJSON or CSV',
      params: schemas.StudyParams,
      querystring: schemas.UploadQuery,
      body: { content: schemas.UPLOAD_BODY },
      response: { 201: schemas.UploadResponse },
    },
    handler: async (request, reply) => {
      const mediaType = uploadMediaType({
        contentType: request.headers['content-type'],
        contentEncoding: request.headers['content-encoding'],
      });
      const upload = await service.uploadTrials(callOf(request), {
        studyId: request.params.studyId,
        acceptance: request.query.acceptance,
        mediaType,
        body: bodyOf(request),
      });
      return reply.status(201).send(upload);
    },
  });
};

/** @throws {ProblemError} `invalid-request` without a body */
function bodyOf(request: FastifyRequest): AsyncIterable<Buffer> {
  const { body } = request;
  if (body !== null && typeof body === 'object' && Symbol.asyncIterator in body) {
    return request.raw;
  }
  throw new ProblemError('invalid-request', 'An upload needs a body with rows.');
}
