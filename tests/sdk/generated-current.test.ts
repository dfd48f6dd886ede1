import { readFileSync } from 'node:fs';
import path from 'node:path';
import { createConfig, lintFromString } from '@redocly/openapi-core';
import { describe, expect, it } from 'vitest';
import { parse } from 'yaml';
import { PROBLEM_TYPES, type ProblemType, problemPath } from '#platform/problems.ts';
import { permissions } from '#server/access/permissions.ts';
import type { ProblemType as SdkProblemType } from '../../client-sdk/src/index.ts';
import { outdatedFiles } from '../support/check-generated.ts';

const text = readFileSync(path.resolve(import.meta.dirname, '../../openapi.yaml'), 'utf8');

/**
 * Problems that the document has as an OpenAPI description.
 * reference: @redocly/openapi-core, rules `struct` (the specification's own structure, OpenAPI
 * 3.1.0), `no-unresolved-refs`, and the rules on paths and operation ids that the text demands.
 */
async function documentFaults(source: string): Promise<string[]> {
  const config = await createConfig({
    rules: {
      struct: 'error',
      'no-unresolved-refs': 'error',
      'path-parameters-defined': 'error',
      'no-identical-paths': 'error',
      'no-ambiguous-paths': 'error',
      'operation-operationId': 'error',
      'operation-operationId-unique': 'error',
      'operation-parameters-unique': 'error',
      'security-defined': 'error',
    },
  });
  const found = await lintFromString({ source, config });
  return found.map(({ message, location }) => `${location[0]?.pointer ?? ''} ${message}`);
}

describe('what is generated', () => {
  it('is what the code makes now', async () => {
    expect(await outdatedFiles()).toEqual([]);
  });
});

describe('openapi.yaml', () => {
  it('is OpenAPI 3.1', async () => {
    expect(parse(text).openapi).toMatch(/^3\.1\./);
    expect(await documentFaults(text)).toEqual([]);
  });

  it('would be refused with a fault in structure, reference or path', async () => {
    const wrong = [
      text.replace('responses:', 'answers:'),
      text.replace('"#/components/schemas/Problem"', '"#/components/schemas/Problems"'),
      text.replace('/v1/labs/{labId}/sites:', '/v1/labs/{lab}/sites:'),
    ];
    for (const source of wrong) expect(await documentFaults(source)).not.toEqual([]);
  });

  it('has each operation of the permission table once, and no other', () => {
    const paths: Record<string, Record<string, { operationId: string }>> = parse(text).paths;
    const operations = Object.values(paths).flatMap((path) =>
      Object.values(path).map(({ operationId }) => operationId),
    );
    expect(operations.sort()).toEqual(Object.keys(permissions).sort());
  });

  it('has the problem types of the table, both ways', () => {
    const listed: string[] = parse(text).components.schemas.Problem.properties.type.enum;
    expect(listed).toEqual(PROBLEM_TYPES.map(problemPath));
  });

  it('drives the union of problem types in the SDK, both ways', () => {
    // The compiler checks these lines (`npm run check`); here they only have to load.
    const toServer = (type: SdkProblemType): ProblemType => type;
    const toSdk = (type: ProblemType): SdkProblemType => type;
    for (const type of PROBLEM_TYPES) expect(toServer(toSdk(type))).toBe(type);
  });
});
