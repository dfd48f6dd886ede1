import type { FastifyPluginAsync } from 'fastify';
import type { ZodTypeProvider } from 'fastify-type-provider-zod';
import { eventStreams } from '#platform/event-stream.ts';
import { callOf } from '#platform/guard.ts';
import { PageQuery } from '#platform/paging.ts';
import { StudyParams } from '#server/studies/schemas.ts';
import * as schemas from './schemas.ts';
import type { AnalysesService } from './service.ts';

const tags = ['analyses'];

export const analysisRoutes: FastifyPluginAsync<{ service: AnalysesService }> = async (
  plain,
  { service },
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();
  const openStream = eventStreams(plain);

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/analyses',
    schema: {
      operationId: 'requestAnalysis',
      tags,
      summary: 'Have a worker run the registered plan on the data of now',
      description:
        'Answers at once with a queued analysis; follow it by polling or by its events. The data ' +
        'are frozen when a worker begins. An analysis is a look, and is logged and counted as one.',
      params: StudyParams,
      body: schemas.RequestAnalysisBody,
      response: { 202: schemas.AnalysisResponse },
    },
    handler: async (request, reply) => {
      const { studyId } = request.params;
      const answer = await service.requestAnalysis(callOf(request), studyId, request.body);
      return reply.status(202).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/analyses',
    schema: {
      operationId: 'listAnalyses',
      tags,
      summary: 'Analyses of a study, newest first',
      params: StudyParams,
      querystring: PageQuery,
      response: { 200: schemas.AnalysisPage },
    },
    handler: (request) =>
      service.listAnalyses(callOf(request), request.params.studyId, request.query),
  });

  app.route({
    method: 'GET',
    url: '/v1/analyses/:analysisId',
    schema: {
      operationId: 'getAnalysis',
      tags,
      summary: 'State and progress of an analysis',
      params: schemas.AnalysisParams,
      response: { 200: schemas.AnalysisResponse },
    },
    handler: (request) => service.getAnalysis(callOf(request), request.params.analysisId),
  });

  app.route({
    method: 'GET',
    url: '/v1/analyses/:analysisId/events',
    schema: {
      operationId: 'followAnalysis',
      tags,
      summary: 'Progress of an analysis as server-sent events, until it ends',
      description:
        'The stream closes after `ended`, after ten minutes, or when the service stops; in the ' +
        'last two cases connect again: the first event tells where the analysis stands.',
      params: schemas.AnalysisParams,
      response: {
        200: {
          description: 'An event stream',
          content: { 'text/event-stream': { schema: schemas.AnalysisEvents } },
        },
      },
    },
    handler: async (request, reply) => {
      const analysis = await service.getAnalysis(callOf(request), request.params.analysisId);
      service.follow(analysis, openStream(reply));
      return reply;
    },
  });

  app.route({
    method: 'POST',
    url: '/v1/analyses/:analysisId/cancellation',
    schema: {
      operationId: 'cancelAnalysis',
      tags,
      summary: 'Cancel an analysis: at once when queued, at its next stage when running',
      params: schemas.AnalysisParams,
      response: { 200: schemas.AnalysisResponse },
    },
    handler: (request) => service.cancelAnalysis(callOf(request), request.params.analysisId),
  });
};
