import swagger from '@fastify/swagger';
import type { FastifyInstance } from 'fastify';
import { jsonSchemaTransform, jsonSchemaTransformObject } from 'fastify-type-provider-zod';
import { stringify } from 'yaml';
import { type RolesOf, referencePage } from './reference-page.ts';

/** The API's version, which the document and the SDK carry. */
export const API_VERSION = '1.0.0';

/** Collects the schemas of all routes registered after it into an OpenAPI 3.1 document. */
export async function registerOpenApi(app: FastifyInstance): Promise<void> {
  await app.register(swagger, {
    openapi: {
      openapi: '3.1.0',
      info: {
        title: 'Fairturn',
        description:
          'Plans and registers within-participants studies, hands out counterbalanced sequences, ' +
          'takes trial uploads, runs the registered analysis and keeps reports for audit.',
        version: API_VERSION,
        license: { name: 'Apache-2.0', identifier: 'Apache-2.0' },
      },
      servers: [{ url: '/' }],
      components: { securitySchemes: { token: { type: 'http', scheme: 'bearer' } } },
      security: [{ token: [] }],
    },
    transform: (route) => {
      const { schema, url } = jsonSchemaTransform(route);
      const open = route.route.config?.open === true;
      return { schema: open ? { ...schema, hide: true } : schema, url };
    },
    transformObject: jsonSchemaTransformObject,
  });
}

/** The document as committed in openapi.yaml. */
export function openApiYaml(app: FastifyInstance): string {
  return stringify(app.swagger(), { lineWidth: 100, aliasDuplicateObjects: false });
}

/** Serves the document and the reference page made from it. */
export function registerReference(app: FastifyInstance, rolesOf: RolesOf): void {
  const open = { config: { open: true } } as const;
  app.get('/openapi.yaml', open, (_request, reply) =>
    reply.type('application/yaml; charset=utf-8').send(openApiYaml(app)),
  );
  app.get('/docs', open, (_request, reply) =>
    reply.type('text/html; charset=utf-8').send(referencePage(app.swagger(), rolesOf)),
  );
}
