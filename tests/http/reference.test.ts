import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { parse } from 'yaml';
import { PROBLEM_TYPES, problemPath, problems } from '#platform/problems.ts';
import { permissions } from '#server/access/permissions.ts';
import { startTestService, type TestService } from '../support/app.ts';

let service: TestService;

beforeAll(async () => {
  service = await startTestService();
});
afterAll(() => service.close());

interface Document {
  openapi: string;
  paths: Record<string, Record<string, { operationId: string; responses: object }>>;
  components: { schemas: Record<string, { properties: Record<string, { enum?: string[] }> }> };
}

async function served(): Promise<Document> {
  const answer = await service.as(null).get('/openapi.yaml');
  expect(answer.status).toBe(200);
  return parse(answer.text ?? answer.body.toString());
}

describe('the problem table', () => {
  it('holds the same types as openapi.yaml', async () => {
    const { components } = await served();
    const listed = components.schemas.Problem?.properties.type?.enum ?? [];
    expect([...listed].sort()).toEqual(PROBLEM_TYPES.map(problemPath).sort());
  });

  it('has a page for every type', async () => {
    for (const name of PROBLEM_TYPES) {
      const page = await service.as(null).get(problemPath(name));
      expect(page.status, name).toBe(200);
      expect(page.text).toContain(problems[name].title);
    }
    expect((await service.as(null).get('/problems/unheard-of')).status).toBe(404);
  });
});

describe('the document', () => {
  it('holds each operation of the permission table once, and no other', async () => {
    const { paths, openapi } = await served();
    expect(openapi).toMatch(/^3\.1\./);
    const operations = Object.values(paths).flatMap((methods) =>
      Object.values(methods).map((operation) => operation.operationId),
    );
    expect(operations.sort()).toEqual(Object.keys(permissions).sort());
  });

  it('promises problem details for everything that is refused', async () => {
    const { paths } = await served();
    for (const methods of Object.values(paths)) {
      for (const operation of Object.values(methods)) {
        expect(JSON.stringify(operation.responses)).toContain('application/problem+json');
      }
    }
  });

  it('is readable at /docs, with the roles of every operation', async () => {
    const page = await service.as(null).get('/docs');
    expect(page.status).toBe(200);
    for (const operation of Object.keys(permissions)) {
      expect(page.text).toContain(`<article id="${operation}">`);
    }
    expect(page.text).not.toMatch(/<script/);
  });
});
