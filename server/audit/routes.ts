import type { FastifyPluginAsync } from 'fastify';
import type { ZodTypeProvider } from 'fastify-type-provider-zod';
import { callOf } from '#platform/guard.ts';
import { PageQuery } from '#platform/paging.ts';
import {
  AuditEntryPage,
  ChainParams,
  CheckpointPage,
  CheckpointResponse,
  PublicKeyResponse,
  VerificationBody,
  VerificationResponse,
} from './schemas.ts';
import type { AuditService } from './service.ts';

export const auditRoutes: FastifyPluginAsync<{ service: AuditService }> = async (
  plain,
  options,
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();
  const { service } = options;

  app.get(
    '/v1/audit/public-key',
    {
      schema: {
        operationId: 'getAuditPublicKey',
        tags: ['audit'],
        summary: 'The public half of the key that signs checkpoints',
        response: { 200: PublicKeyResponse },
      },
    },
    () => service.publicKey(),
  );

  app.get(
    '/v1/audit/chains/:chain/entries',
    {
      schema: {
        operationId: 'listAuditEntries',
        tags: ['audit'],
        summary: 'Entries of one chain in order',
        params: ChainParams,
        querystring: PageQuery,
        response: { 200: AuditEntryPage },
      },
    },
    (request) => service.listEntries(callOf(request), request.params.chain, request.query),
  );

  app.post(
    '/v1/audit/checkpoints',
    {
      schema: {
        operationId: 'makeCheckpoint',
        tags: ['audit'],
        summary: 'Sign the heads of the chains; keep the answer outside the database',
        response: { 201: CheckpointResponse },
      },
    },
    async (request, reply) => {
      const answer = await service.makeCheckpoint(callOf(request));
      return reply.status(201).send(answer.body);
    },
  );

  app.get(
    '/v1/audit/checkpoints',
    {
      schema: {
        operationId: 'listCheckpoints',
        tags: ['audit'],
        summary: 'Checkpoints made so far',
        querystring: PageQuery,
        response: { 200: CheckpointPage },
      },
    },
    (request) => service.listCheckpoints(callOf(request), request.query),
  );

  app.post(
    '/v1/audit/verifications',
    {
      schema: {
        operationId: 'verifyAudit',
        tags: ['audit'],
        summary: 'Recompute the chains from the raw rows, against a checkpoint if one is given',
        body: VerificationBody,
        response: { 200: VerificationResponse },
      },
    },
    (request) => service.verify(callOf(request), request.body.checkpoint),
  );
};
