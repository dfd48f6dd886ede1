import type { FastifyPluginAsync } from 'fastify';
import type { ZodTypeProvider } from 'fastify-type-provider-zod';
import { callOf } from '#platform/guard.ts';
import { PageQuery } from '#platform/paging.ts';
import * as schemas from './schemas.ts';
import type { AccessService } from './service.ts';

const tags = ['access'];

export const accessRoutes: FastifyPluginAsync<{ service: AccessService }> = async (
  plain,
  { service },
) => {
  const app = plain.withTypeProvider<ZodTypeProvider>();

  app.route({
    method: 'POST',
    url: '/v1/labs',
    schema: {
      operationId: 'createLab',
      tags,
      summary: 'Create a lab',
      body: schemas.CreateLabBody,
      response: { 201: schemas.LabResponse },
    },
    handler: async (request, reply) => {
      const answer = await service.createLab(callOf(request), request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/labs',
    schema: {
      operationId: 'listLabs',
      tags,
      summary: 'Labs that the token can see',
      querystring: PageQuery,
      response: { 200: schemas.LabPage },
    },
    handler: (request) => service.listLabs(callOf(request), request.query),
  });

  app.route({
    method: 'POST',
    url: '/v1/labs/:labId/sites',
    schema: {
      operationId: 'createSite',
      tags,
      summary: 'Create a site of a lab',
      params: schemas.LabParams,
      body: schemas.CreateSiteBody,
      response: { 201: schemas.SiteResponse },
    },
    handler: async (request, reply) => {
      const answer = await service.createSite(callOf(request), request.params.labId, request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/sites',
    schema: {
      operationId: 'listSites',
      tags,
      summary: 'Sites that the token can see',
      querystring: schemas.SiteListQuery,
      response: { 200: schemas.SitePage },
    },
    handler: (request) => service.listSites(callOf(request), request.query),
  });

  app.route({
    method: 'POST',
    url: '/v1/sites/:siteId/stations',
    schema: {
      operationId: 'createStation',
      tags,
      summary: 'Create a station of a site',
      params: schemas.SiteParams,
      body: schemas.CreateStationBody,
      response: { 201: schemas.StationResponse },
    },
    handler: async (request, reply) => {
      const { siteId } = request.params;
      const answer = await service.createStation(callOf(request), siteId, request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/sites/:siteId/stations',
    schema: {
      operationId: 'listStations',
      tags,
      summary: 'Stations of a site',
      params: schemas.SiteParams,
      querystring: PageQuery,
      response: { 200: schemas.StationPage },
    },
    handler: (request) =>
      service.listStations(callOf(request), request.params.siteId, request.query),
  });

  app.route({
    method: 'POST',
    url: '/v1/accounts',
    schema: {
      operationId: 'createAccount',
      tags,
      summary: 'Create the account of a person',
      body: schemas.CreateAccountBody,
      response: { 201: schemas.AccountResponse },
    },
    handler: async (request, reply) => {
      const answer = await service.createAccount(callOf(request), request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/accounts',
    schema: {
      operationId: 'listAccounts',
      tags,
      summary: 'Accounts that the token can see',
      querystring: PageQuery,
      response: { 200: schemas.AccountPage },
    },
    handler: (request) => service.listAccounts(callOf(request), request.query),
  });

  app.route({
    method: 'POST',
    url: '/v1/accounts/:accountId/closure',
    schema: {
      operationId: 'closeAccount',
      tags,
      summary: 'Close an account and revoke its tokens',
      params: schemas.AccountParams,
      response: { 200: schemas.AccountResponse },
    },
    handler: (request) => service.closeAccount(callOf(request), request.params.accountId),
  });

  app.route({
    method: 'POST',
    url: '/v1/tokens',
    schema: {
      operationId: 'createToken',
      tags,
      summary: 'Create a token with a role and a place; shown once',
      body: schemas.CreateTokenBody,
      response: { 201: schemas.CreatedTokenResponse },
    },
    handler: async (request, reply) => {
      const answer = await service.createToken(callOf(request), request.body);
      return reply.status(201).send(answer.body);
    },
  });

  app.route({
    method: 'GET',
    url: '/v1/tokens',
    schema: {
      operationId: 'listTokens',
      tags,
      summary: 'Tokens that the token can see, without the secret',
      querystring: PageQuery,
      response: { 200: schemas.TokenPage },
    },
    handler: (request) => service.listTokens(callOf(request), request.query),
  });

  app.route({
    method: 'GET',
    url: '/v1/tokens/own',
    schema: {
      operationId: 'getOwnToken',
      tags,
      summary: 'Role and place of the token in use',
      response: { 200: schemas.TokenResponse },
    },
    handler: (request) => service.getOwnToken(callOf(request)),
  });

  app.route({
    method: 'POST',
    url: '/v1/tokens/:tokenId/revocation',
    schema: {
      operationId: 'revokeToken',
      tags,
      summary: 'Revoke a token at once',
      params: schemas.TokenParams,
      response: { 200: schemas.TokenResponse },
    },
    handler: (request) => service.revokeToken(callOf(request), request.params.tokenId),
  });
};
