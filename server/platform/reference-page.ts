import { z } from 'zod';

/** The part of an OpenAPI 3.1 document that the reference page shows. */
const SchemaObject = z.looseObject({});
type SchemaObject = z.infer<typeof SchemaObject>;

const Content = z.record(z.string(), z.looseObject({ schema: SchemaObject.optional() }));

const OperationObject = z.looseObject({
  operationId: z.string(),
  tags: z.array(z.string()).default([]),
  summary: z.string().default(''),
  description: z.string().default(''),
  parameters: z
    .array(
      z.looseObject({
        name: z.string(),
        in: z.string(),
        required: z.boolean().default(false),
        description: z.string().default(''),
        schema: SchemaObject.default({}),
      }),
    )
    .default([]),
  requestBody: z.looseObject({ content: Content }).optional(),
  responses: z.record(
    z.string(),
    z.looseObject({ description: z.string().default(''), content: Content.optional() }),
  ),
});
type OperationObject = z.infer<typeof OperationObject>;

const Document = z.looseObject({
  info: z.looseObject({ title: z.string(), version: z.string(), description: z.string() }),
  paths: z.record(z.string(), z.record(z.string(), OperationObject)),
  components: z.looseObject({ schemas: z.record(z.string(), SchemaObject).default({}) }),
});

/** Who may do an operation, as the permission table says. */
export type RolesOf = (operation: string) => readonly string[];

/**
 * The API reference as one self-contained HTML page without scripts, made from the OpenAPI document
 * that the service serves, so that the two cannot differ.
 *
 * @param openApi the OpenAPI 3.1 document
 */
export function referencePage(openApi: unknown, rolesOf: RolesOf): string {
  const document = Document.parse(openApi);
  const operations = Object.entries(document.paths).flatMap(([url, methods]) =>
    Object.entries(methods).map(([method, operation]) => ({ url, method, operation })),
  );
  const tags = [...new Set(operations.flatMap(({ operation }) => operation.tags))];
  const sections = tags.map((tag) => {
    const own = operations.filter(({ operation }) => operation.tags.includes(tag));
    const parts = own.map(({ url, method, operation }) =>
      operationSection(url, method, operation, rolesOf(operation.operationId)),
    );
    return `<section><h2 id="${escaped(tag)}">${escaped(tag)}</h2>${parts.join('')}</section>`;
  });
  const shapes = Object.entries(document.components.schemas).map(
    ([name, schema]) =>
      `<h3 id="shape-${escaped(name)}">${escaped(name)}</h3>${schemaBlock(schema)}`,
  );
  const contents = tags.map((tag) => `<li><a href="#${escaped(tag)}">${escaped(tag)}</a></li>`);
  return `<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>${escaped(document.info.title)} API reference</title>
<style>${STYLE}</style>
</head>
<body>
<h1>${escaped(document.info.title)} API reference, version ${escaped(document.info.version)}</h1>
<p>${escaped(document.info.description)}</p>
<p>The document behind this page: <a href="/openapi.yaml">openapi.yaml</a>. Every request needs
<code>Authorization: Bearer …</code>; what a station does also needs <code>Operator-Code</code>;
requests that create take <code>Idempotency-Key</code>. Refusals are problem details (RFC 9457).</p>
<nav aria-label="Contents"><ul>${contents.join('')}<li><a href="#shapes">shapes</a></li></ul></nav>
${sections.join('\n')}
<section><h2 id="shapes">Shapes</h2>${shapes.join('\n')}</section>
</body>
</html>
`;
}

function operationSection(
  url: string,
  method: string,
  operation: OperationObject,
  roles: readonly string[],
): string {
  const parameters = operation.parameters.map(
    (parameter) =>
      `<tr><td><code>${escaped(parameter.name)}</code></td><td>${escaped(parameter.in)}</td>` +
      `<td>${parameter.required ? 'yes' : 'no'}</td><td>${typeText(parameter.schema)} ` +
      `${escaped(parameter.description)}</td></tr>`,
  );
  const table =
    parameters.length === 0
      ? ''
      : '<table><thead><tr><th scope="col">Parameter</th><th scope="col">In</th>' +
        '<th scope="col">Needed</th><th scope="col">Type</th></tr></thead>' +
        `<tbody>${parameters.join('')}</tbody></table>`;
  const body =
    operation.requestBody === undefined ? '' : contentList('Body', operation.requestBody.content);
  const answers = Object.entries(operation.responses).map(([status, response]) =>
    contentList(`Answer ${status}`, response.content ?? {}),
  );
  return `<article id="${escaped(operation.operationId)}">
<h3><code>${method.toUpperCase()} ${escaped(url)}</code></h3>
<p>${escaped(operation.summary)}. ${escaped(operation.description)}</p>
<p>Roles: ${roles.map(escaped).join(', ')}.
Operation: <code>${escaped(operation.operationId)}</code></p>
${table}${body}${answers.join('')}</article>`;
}

function contentList(title: string, content: z.infer<typeof Content>): string {
  const entries = Object.entries(content);
  if (entries.length === 0) return `<p>${title}: no content.</p>`;
  return entries
    .map(([mediaType, { schema }]) => {
      const label = `<p>${title}, <code>${escaped(mediaType)}</code>: `;
      if (schema === undefined) return `${label}as described.</p>`;
      return typeof schema.$ref === 'string'
        ? `${label}${typeText(schema)}</p>`
        : `${label}</p>${schemaBlock(schema)}`;
    })
    .join('');
}

/** One line for a schema: a link for a named shape, else its type. */
function typeText(schema: SchemaObject): string {
  if (typeof schema.$ref === 'string') {
    const name = escaped(schema.$ref.split('/').at(-1) ?? '');
    return `<a href="#shape-${name}">${name}</a>`;
  }
  const type = schema.format ?? schema.type ?? schema.const ?? 'value';
  return `<code>${escaped(Array.isArray(type) ? type.join(' or ') : String(type))}</code>`;
}

/** The schema as JSON, with the names of other shapes made into links. */
function schemaBlock(schema: SchemaObject): string {
  const text = escaped(JSON.stringify(schema, null, 2));
  const linked = text.replace(
    /&quot;#\/components\/schemas\/([A-Za-z0-9_-]+)&quot;/g,
    '&quot;<a href="#shape-$1">$1</a>&quot;',
  );
  return `<details><summary>JSON Schema</summary><pre>${linked}</pre></details>`;
}

function escaped(text: string): string {
  return text
    .replaceAll('&', '&amp;')
    .replaceAll('<', '&lt;')
    .replaceAll('>', '&gt;')
    .replaceAll('"', '&quot;');
}

const STYLE = `
body { font: 1rem/1.5 system-ui, sans-serif; max-width: 60rem; margin: 2rem auto; padding: 0 1rem; }
code, pre { font-family: ui-monospace, monospace; font-size: 0.9em; }
pre { overflow-x: auto; background: #f4f4f0; padding: 0.75rem; }
table { border-collapse: collapse; } th, td { text-align: left; padding: 0.2rem 0.8rem 0.2rem 0; }
article { border-top: 1px solid #ccc; padding: 0.5rem 0; }
`;
