import type { FastifyPluginAsync, FastifyReply } from 'fastify';
import type { ZodTypeProvider } from 'fastify-type-provider-zod';
import { z } from 'zod';
import { callOf } from '#platform/guard.ts';
import { PageQuery } from '#platform/paging.ts';
import { StudyParams } from '#server/studies/schemas.ts';
import * as schemas from './schemas.ts';
import type { ReportsService } from './service.ts';

const tags = ['reports'];

export const reportRoutes: FastifyPluginAsync<{ service: ReportsService }> = async (
  plain,
  { service },
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/reports',
    schema: {
      operationId: 'listReports',
      tags,
      summary: 'Filed reports of a study, newest first, without their bodies',
      params: StudyParams,
      querystring: PageQuery,
      response: { 200: schemas.ReportPage },
    },
    handler: (request) =>
      service.listReports(callOf(request), request.params.studyId, request.query),
  });

  app.route({
    method: 'GET',
    url: '/v1/reports/:reportId',
    schema: {
      operationId: 'getReport',
      tags,
      summary: 'A filed report: number, time, requester, hashes, and the body as JSON',
      params: schemas.ReportParams,
      response: { 200: schemas.ReportResponse },
    },
    handler: (request) => service.getReport(callOf(request), request.params.reportId),
  });

  app.route({
    method: 'GET',
    url: '/v1/reports/:reportId/body',
    schema: {
      operationId: 'getReportBody',
      tags,
      summary: 'The exact bytes that the SHA-256 of the report is about',
      params: schemas.ReportParams,
      response: {
        200: {
          description: 'Canonical JSON (RFC 8785), with its digest in Repr-Digest and ETag',
          content: { 'application/json': { schema: z.record(z.string(), z.unknown()) } },
        },
      },
    },
    handler: async (request, reply) => {
      const bytes = await service.getReportBody(callOf(request), request.params.reportId);
      return sendBytes(reply, 'application/json', bytes);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/reports/:reportId/page',
    schema: {
      operationId: 'getReportPage',
      tags,
      summary: 'The report as one HTML page that needs nothing else',
      params: schemas.ReportParams,
      response: {
        200: {
          description: 'HTML with its style and figures inside',
          content: { 'text/html': { schema: z.string() } },
        },
      },
    },
    handler: async (request, reply) => {
      const bytes = await service.getReportPage(callOf(request), request.params.reportId);
      return sendBytes(reply, 'text/html; charset=utf-8', bytes);
    },
  });

  app.route({
    method: 'POST',
    url: '/v1/reports/:reportId/recomputations',
    schema: {
      operationId: 'recomputeReport',
      tags,
      summary: 'Compute the report again from what it was made from, and compare the bytes',
      params: schemas.ReportParams,
      response: { 200: schemas.RecomputationResponse },
    },
    handler: (request) => service.recompute(callOf(request), request.params.reportId),
  });
};

/** Sends text as the bytes it was hashed as; Repr-Digest as in RFC 9530. */
function sendBytes(
  reply: FastifyReply,
  mediaType: string,
  { text, sha256 }: { text: string; sha256: string },
): FastifyReply {
  const digest = Buffer.from(sha256, 'hex').toString('base64');
  return reply
    .type(mediaType)
    .header('etag', `"${sha256}"`)
    .header('repr-digest', `sha-256=:${digest}:`)
    .header('cache-control', 'private, no-cache')
    .send(Buffer.from(text, 'utf8'));
}
