import type { FastifyPluginAsync } from 'fastify';
import type { ZodTypeProvider } from 'fastify-type-provider-zod';
import { callOf } from '#platform/guard.ts';
import { PageQuery } from '#platform/paging.ts';
import { PredictabilityBody, PredictabilityResponse } from './predictability-schemas.ts';
import * as schemas from './schemas.ts';
import type { AllocationsService } from './service.ts';

const tags = ['allocations'];

export const allocationsRoutes: FastifyPluginAsync<{ service: AllocationsService }> = async (
  plain,
  { service },
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/arrivals',
    schema: {
      operationId: 'recordArrival',
      tags,
      summary: 'Check a participant in: somebody new gets the next slot, needs an Idempotency-Key',
      params: schemas.StudyParams,
      body: schemas.ArrivalBody,
      response: {
        200: schemas.ArrivalResponse.describe('Somebody returning'),
        201: schemas.ArrivalResponse.describe('Somebody new'),
      },
    },
    handler: async (request, reply) => {
      const { studyId } = request.params;
      const answer = await service.recordArrival(callOf(request), studyId, request.body);
      return reply.status(answer.status === 201 ? 201 : 200).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/participants',
    schema: {
      operationId: 'listParticipants',
      tags,
      summary: 'Participants that the token can see, in the order of arrival',
      params: schemas.StudyParams,
      querystring: PageQuery,
      response: { 200: schemas.ParticipantPage },
    },
    handler: (request) =>
      service.listParticipants(callOf(request), request.params.studyId, request.query),
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/participants/:code',
    schema: {
      operationId: 'getParticipant',
      tags,
      summary: 'One participant',
      params: schemas.ParticipantParams,
      response: { 200: schemas.ParticipantResponse },
    },
    handler: (request) =>
      service.getParticipant(callOf(request), request.params.studyId, request.params.code),
  });

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/balance',
    schema: {
      operationId: 'getBalance',
      tags,
      summary: 'How slots are spread over sites, sequences, periods and ordered pairs',
      params: schemas.StudyParams,
      querystring: schemas.BalanceQuery,
      response: { 200: schemas.BalanceResponse },
    },
    handler: (request) => {
      const { protocolVersion } = request.query;
      return service.getBalance(callOf(request), request.params.studyId, protocolVersion);
    },
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/replays',
    schema: {
      operationId: 'replayAllocations',
      tags,
      summary: 'Recompute every allocation of a closed study from its secret',
      params: schemas.StudyParams,
      response: { 200: schemas.ReplayResponse },
    },
    handler: (request) => service.replayAllocations(callOf(request), request.params.studyId),
  });

  app.route({
    method: 'POST',
    url: '/v1/predictability-estimates',
    schema: {
      operationId: 'estimatePredictability',
      tags,
      summary: 'How often the next sequence can be guessed under each policy, by simulation',
      body: PredictabilityBody,
      response: { 200: PredictabilityResponse },
    },
    handler: (request) => service.estimatePredictability(request.body),
  });

  await app.register(stationRoutes, { service });
};

/** What is done with one participant. */
const stationRoutes: FastifyPluginAsync<{ service: AllocationsService }> = async (
  plain,
  { service },
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();

  app.route({
    method: 'GET',
    url: '/v1/studies/:studyId/participants/:code/due',
    schema: {
      operationId: 'getDuePeriod',
      tags,
      summary: 'Which period is due, with which condition, from when until when',
      params: schemas.ParticipantParams,
      response: { 200: schemas.DuePeriodResponse },
    },
    handler: (request) =>
      service.getDuePeriod(callOf(request), request.params.studyId, request.params.code),
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/participants/:code/period-starts',
    schema: {
      operationId: 'startPeriod',
      tags,
      summary: 'Note that a period begins; out of turn or washout only as a deviation',
      params: schemas.ParticipantParams,
      body: schemas.PeriodStartBody,
      response: { 201: schemas.PeriodStartResponse },
    },
    handler: async (request, reply) => {
      const { studyId, code } = request.params;
      const answer = await service.startPeriod(callOf(request), studyId, code, request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/participants/:code/withdrawal',
    schema: {
      operationId: 'recordWithdrawal',
      tags,
      summary: 'Note that a participant stops; the slot may go to somebody else',
      params: schemas.ParticipantParams,
      body: schemas.WithdrawalBody,
      response: { 200: schemas.ParticipantResponse },
    },
    handler: async (request) => {
      const { studyId, code } = request.params;
      return (await service.recordWithdrawal(callOf(request), studyId, code, request.body)).body;
    },
  });

  app.route({
    method: 'POST',
    url: '/v1/studies/:studyId/participants/:code/void',
    schema: {
      operationId: 'voidArrival',
      tags,
      summary: 'Undo a check-in that was a mistake, before anything was begun',
      params: schemas.ParticipantParams,
      body: schemas.VoidBody,
      response: { 200: schemas.ParticipantResponse },
    },
    handler: async (request) => {
      const { studyId, code } = request.params;
      return (await service.voidArrival(callOf(request), studyId, code, request.body)).body;
    },
  });
};
