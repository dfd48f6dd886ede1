import type { FastifyPluginAsync } from 'fastify';
import type { ZodTypeProvider } from 'fastify-type-provider-zod';
import { callOf } from '#platform/guard.ts';
import { PageQuery } from '#platform/paging.ts';
import * as schemas from './schemas.ts';
import type { StudiesService } from './service.ts';

const tags = ['studies'];

export const studiesRoutes: FastifyPluginAsync<{ service: StudiesService }> = async (
  plain,
  { service },
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();

  app.route({
    method: 'POST',
    url: '/v1/studies',
    schema: {
      operationId: 'createStudy',
      tags,
      summary: 'Create a study, owned by the lab of the token',
      body: schemas.CreateStudyBody,
      response: { 201: schemas.StudyResponse },
    },
    handler: async (request, reply) => {
      const answer = await service.createStudy(callOf(request), request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/studies',
    schema: {
      operationId: 'listStudies',
      tags,
      summary: 'Studies that the token can see',
      querystring: PageQuery,
      response: { 200: schemas.StudyPage },
    },
    handler: (request) => service.listStudies(callOf(request), request.query),
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId',
    schema: {
      operationId: 'getStudy',
      tags,
      summary: 'One study and its state',
      params: schemas.StudyParams,
      response: { 200: schemas.StudyResponse },
    },
    handler: (request) => service.getStudy(callOf(request), request.params.studyId),
  });

  app.route({
    method: 'POST',
    url: '/v1/scheme-previews',
    schema: {
      operationId: 'previewScheme',
      tags,
      summary: 'What a scheme would hand out, before anything is registered',
      body: schemas.SchemePreviewBody,
      response: { 200: schemas.SchemePreviewResponse },
    },
    handler: async (request) => service.previewScheme(request.body),
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/allocation-secret',
    schema: {
      operationId: 'getAllocationSecret',
      tags,
      summary: 'The allocation secret of a closed study; each reading is logged',
      params: schemas.StudyParams,
      response: { 200: schemas.SecretResponse },
    },
    handler: (request) => service.getAllocationSecret(callOf(request), request.params.studyId),
  });

  await app.register(protocolRoutes, { service });
  await app.register(stateRoutes, { service });
};

const protocolRoutes: FastifyPluginAsync<{ service: StudiesService }> = async (
  plain,
  { service },
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/protocol-draft',
    schema: {
      operationId: 'getProtocolDraft',
      tags,
      summary: 'The protocol draft',
      params: schemas.StudyParams,
      response: { 200: schemas.DraftResponse },
    },
    handler: (request) => service.getDraft(callOf(request), request.params.studyId),
  });

  app.route({
    method: 'PUT',
    url: '/v1/studies/:studyId/protocol-draft',
    schema: {
      operationId: 'putProtocolDraft',
      tags,
      summary: 'Save the protocol draft in place of the revision it names',
      params: schemas.StudyParams,
      body: schemas.PutDraftBody,
      response: { 200: schemas.DraftRevisionResponse },
    },
    handler: (request) => service.putDraft(callOf(request), request.params.studyId, request.body),
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/protocol-draft/check',
    schema: {
      operationId: 'checkProtocolDraft',
      tags,
      summary: 'Everything that keeps the draft from being registered',
      params: schemas.StudyParams,
      response: { 200: schemas.DraftCheckResponse },
    },
    handler: (request) => service.checkDraft(callOf(request), request.params.studyId),
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/protocol-versions',
    schema: {
      operationId: 'registerProtocol',
      tags,
      summary: 'Register the draft: fix and hash it; the first registration opens enrolment',
      params: schemas.StudyParams,
      body: schemas.RegisterProtocolBody,
      response: { 201: schemas.VersionResponse },
    },
    handler: async (request, reply) => {
      const { studyId } = request.params;
      const answer = await service.registerProtocol(callOf(request), studyId, request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/protocol-versions',
    schema: {
      operationId: 'listProtocolVersions',
      tags,
      summary: 'Registered versions of the protocol, without the documents',
      params: schemas.StudyParams,
      querystring: PageQuery,
      response: { 200: schemas.VersionPage },
    },
    handler: (request) =>
      service.listVersions(callOf(request), request.params.studyId, request.query),
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/protocol-versions/:number',
    schema: {
      operationId: 'getProtocolVersion',
      tags,
      summary: 'One registered version of the protocol',
      params: schemas.VersionParams,
      response: { 200: schemas.VersionResponse },
    },
    handler: (request) =>
      service.getVersion(callOf(request), request.params.studyId, request.params.number),
  });
};

const stateRoutes: FastifyPluginAsync<{ service: StudiesService }> = async (plain, { service }) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();
  const changes = [
    {
      path: 'pause',
      operationId: 'pauseStudy',
      summary: 'Take nobody new for a while; those under way go on',
      change: service.pauseStudy,
    },
    {
      path: 'resume',
      operationId: 'resumeStudy',
      summary: 'Take new participants again',
      change: service.resumeStudy,
    },
    {
      path: 'closure',
      operationId: 'closeStudy',
      summary: 'End enrolment for good; those under way may finish',
      change: service.closeStudy,
    },
  ];
  for (const { path, operationId, summary, change } of changes) {
    app.route({
      method: 'POST',
      url: `/v1/studies/:studyId/${path}`,
      schema: {
        operationId,
        tags,
        summary,
        params: schemas.StudyParams,
        body: schemas.StateChangeBody,
        response: { 200: schemas.StudyResponse },
      },
      handler: async (request) =>
        (await change(callOf(request), request.params.studyId, request.body)).body,
    });
  }
};
