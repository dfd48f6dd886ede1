import swagger from '@fastify/swagger';
import type { FastifyInstance, FastifySchema } from 'fastify';
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
      const { schema, url } = describedBody(route);
      const open = route.route.config?.open === true;
      if (open) return { schema: { ...schema, hide: true }, url };
      return { schema: route.route.method === 'GET' ? schema : withHeaders(schema), url };
    },
    transformObject: (input) => withoutUnusedSchemas(jsonSchemaTransformObject(input)),
  });
}

type RouteToDescribe = Parameters<typeof jsonSchemaTransform>[0];
type DescribedRoute = ReturnType<typeof jsonSchemaTransform>;

/** A body of several media types is described type by type: the provider knows only one schema. */
function describedBody(route: RouteToDescribe): DescribedRoute {
  const { body, ...rest } = route.schema ?? {};
  if (typeof body !== 'object' || body === null || !('content' in body)) {
    return jsonSchemaTransform(route);
  }
  const described = Object.entries(body.content as Record<string, { schema: unknown }>).map(
    ([mediaType, { schema }]) => {
      const one = jsonSchemaTransform({ ...route, schema: { body: schema } });
      return [mediaType, { schema: one.schema.body }];
    },
  );
  const { schema, url } = jsonSchemaTransform({ ...route, schema: rest });
  return { schema: { ...schema, body: { content: Object.fromEntries(described) } }, url };
}

/** Names the headers that the guard reads from every request that changes something. */
function withHeaders(schema: FastifySchema): FastifySchema {
  const properties = {
    'idempotency-key': {
      type: 'string',
      pattern: '^[\\x21-\\x7e]{1,200}$',
      description: 'The same key and request give the first answer again; nothing is done twice',
    },
    'operator-code': {
      type: 'string',
      pattern: '^[A-Za-z0-9][A-Za-z0-9_-]{0,39}$',
      description: 'Code of the person at the station; a station must send it',
    },
  };
  return { ...schema, headers: { type: 'object', properties } };
}

/**
 * Every named schema is written out twice, as what is read (`…Input`) and as what is answered; most
 * of those nothing refers to. Those are left out, and an `…Input` gets the plain name when its twin
 * is left out or says the same.
 */
function withoutUnusedSchemas<Document extends object>(document: Document): Document {
  const { components, paths }: OpenApiParts = JSON.parse(JSON.stringify(document));
  const schemas = components?.schemas ?? {};
  const used = new Set<string>();
  const queue = referredIn(paths);
  for (let name = queue.pop(); name !== undefined; name = queue.pop()) {
    if (used.has(name)) continue;
    used.add(name);
    queue.push(...referredIn(schemas[name]));
  }
  const same = sameTwins(schemas);
  const renamed = (name: string): string => {
    const plain = name.replace(/Input$/, '');
    return used.has(plain) && !same.has(plain) ? name : plain;
  };
  const kept = [...used]
    .map((name) => [renamed(name), schemas[name]] as const)
    .sort(([a], [b]) => (a < b ? -1 : 1));
  const tidied = { ...document, components: { ...components, schemas: Object.fromEntries(kept) } };
  return JSON.parse(
    JSON.stringify(tidied).replace(REFERENCE, (_all, name: string) => reference(renamed(name))),
  );
}

/** Names whose two forms say the same, and refer only to such names or to the same ones. */
function sameTwins(schemas: Readonly<Record<string, unknown>>): Set<string> {
  const plainText = (schema: unknown) => JSON.stringify(schema).replace(REFERENCE_INPUT, '"');
  const twins = Object.keys(schemas).filter((name) => `${name}Input` in schemas);
  const same = new Set(
    twins.filter((name) => plainText(schemas[name]) === plainText(schemas[`${name}Input`])),
  );
  for (let before = -1; before !== same.size; ) {
    before = same.size;
    for (const name of same) {
      const others = referredIn(schemas[name]);
      if (others.some((other) => twins.includes(other) && !same.has(other))) same.delete(name);
    }
  }
  return same;
}

interface OpenApiParts {
  readonly components?: { readonly schemas?: Readonly<Record<string, unknown>> };
  readonly paths?: unknown;
}

const REFERENCE = /"#\/components\/schemas\/([^"]+)"/g;

const REFERENCE_INPUT = /(?<="#\/components\/schemas\/[^"]+)Input"/g;

function reference(name: string): string {
  return JSON.stringify(`#/components/schemas/${name}`);
}

function referredIn(part: unknown): string[] {
  return [...(JSON.stringify(part) ?? '').matchAll(REFERENCE)].flatMap(([, name]) => name ?? []);
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
