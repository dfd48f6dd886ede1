/** One statement about the database a line, such as `labs.name: text, not null`. */
export type SchemaFacts = readonly string[];

interface Field {
  readonly name: string;
  readonly type: string;
  readonly list: boolean;
  readonly optional: boolean;
  /** Attribute name to its arguments, empty when it has none. */
  readonly attributes: ReadonlyMap<string, string>;
}

interface Model {
  readonly name: string;
  readonly table: string;
  readonly fields: readonly Field[];
  readonly keys: readonly { kind: string; fields: readonly string[] }[];
}

const FIELD_ATTRIBUTES = /^(id|unique|map|default|relation|db\.\w+)$/;
const KEY_KINDS: Readonly<Record<string, string>> = {
  id: 'primary key',
  unique: 'unique',
  index: 'index',
};

/** PostgreSQL's name for the type of a field (Prisma's reference, PostgreSQL types). */
const PLAIN_TYPES: Readonly<Record<string, string>> = {
  String: 'text',
  Int: 'integer',
  BigInt: 'bigint',
  Float: 'double precision',
  Boolean: 'boolean',
  Bytes: 'bytea',
  DateTime: 'timestamp(3) without time zone',
};

/**
 * What a Prisma schema says of the database: columns with type, nullability and default, primary
 * and unique keys, indexes, foreign keys with their actions. Reads the part of the language that
 * the project uses and throws on any other.
 */
export function factsOfPrismaSchema(text: string): SchemaFacts {
  const models = parseModels(text);
  return models.flatMap((model) => factsOfModel(model, models)).sort();
}

function parseModels(text: string): Model[] {
  const models: Model[] = [];
  const plain = text.replaceAll(/\/\/.*$/gm, '');
  for (const [, kind, name = '', body = ''] of plain.matchAll(/^(\w+) (\w+) \{([^}]*)\}/gm)) {
    if (kind === 'generator' || kind === 'datasource') continue;
    if (kind !== 'model') throw new Error(`A Prisma schema's ${kind} blocks are not understood.`);
    models.push(parseModel(name, body));
  }
  return models;
}

function parseModel(name: string, body: string): Model {
  const fields: Field[] = [];
  const keys: { kind: string; fields: readonly string[] }[] = [];
  let table = name;
  for (const line of body.split('\n').map((raw) => raw.trim())) {
    if (line === '') continue;
    const block = /^@@(\w+)\((.*)\)$/.exec(line);
    if (block === null) {
      fields.push(parseField(name, line));
      continue;
    }
    const [, kind = '', content = ''] = block;
    const keyKind = KEY_KINDS[kind];
    if (kind === 'map') table = unquoted(content);
    else if (keyKind !== undefined) keys.push({ kind: keyKind, fields: listed(content) });
    else throw new Error(`${name}: @@${kind} is not understood.`);
  }
  return { name, table, fields, keys };
}

function parseField(model: string, line: string): Field {
  const parts = /^(\w+)\s+(\w+)(\[\])?(\?)?\s*(.*)$/.exec(line);
  if (parts === null) throw new Error(`${model}: "${line}" is not understood.`);
  const [, name = '', type = '', list, optional, rest = ''] = parts;
  const attributes = new Map<string, string>();
  const remaining = rest.replaceAll(/@([\w.]+)(?:\(((?:[^()]|\([^()]*\))*)\))?/g, (...found) => {
    const [, attribute, content] = found.map((part) => (part === undefined ? '' : String(part)));
    if (attribute === undefined || !FIELD_ATTRIBUTES.test(attribute)) {
      throw new Error(`${model}.${name}: @${attribute} is not understood.`);
    }
    attributes.set(attribute, content ?? '');
    return '';
  });
  if (remaining.trim() !== '') throw new Error(`${model}.${name}: "${remaining}" is left over.`);
  return { name, type, list: list !== undefined, optional: optional !== undefined, attributes };
}

function factsOfModel(model: Model, models: readonly Model[]): string[] {
  const facts: string[] = [];
  const { table } = model;
  const columns = (names: readonly string[]) =>
    names.map((name) => columnOf(model, name)).join(', ');
  for (const key of model.keys) facts.push(`${table}: ${key.kind} (${columns(key.fields)})`);
  for (const field of model.fields) {
    const target = models.find(({ name }) => name === field.type);
    if (target === undefined) facts.push(columnFact(model, field));
    else facts.push(...foreignKeyFacts(model, field, target));
    if (field.attributes.has('id')) facts.push(`${table}: primary key (${columns([field.name])})`);
    if (field.attributes.has('unique')) facts.push(`${table}: unique (${columns([field.name])})`);
  }
  return facts;
}

function columnFact(model: Model, field: Field): string {
  // A list cannot be optional in Prisma, which says nothing of the column: it reads null as empty.
  const optional = field.optional ? ', null' : ', not null';
  const nullable = field.list ? '' : optional;
  const start = field.attributes.get('default');
  const ending = start === undefined ? '' : `, default ${start}`;
  const column = columnOf(model, field.name);
  return `${model.table}.${column}: ${columnType(model, field)}${nullable}${ending}`;
}

function columnType(model: Model, field: Field): string {
  const native = [...field.attributes].find(([name]) => name.startsWith('db.'));
  let type = PLAIN_TYPES[field.type];
  if (native?.[0] === 'db.Uuid') type = 'uuid';
  else if (native?.[0] === 'db.Timestamptz') type = `timestamp(${native[1]}) with time zone`;
  else if (native !== undefined) type = undefined;
  if (type === undefined) {
    throw new Error(`${model.name}.${field.name}: the type ${field.type} is not understood.`);
  }
  return field.list ? `${type}[]` : type;
}

/** One for the side that holds the columns, none for the other. */
function foreignKeyFacts(model: Model, field: Field, target: Model): string[] {
  const relation = field.attributes.get('relation');
  if (relation === undefined) return [];
  const part = (name: string) => new RegExp(`${name}: (\\[[^\\]]*\\]|\\w+)`).exec(relation)?.[1];
  const from = listed(part('fields') ?? '').map((name) => columnOf(model, name));
  const to = listed(part('references') ?? '').map((name) => columnOf(target, name));
  const onDelete = action(part('onDelete') ?? (field.optional ? 'SetNull' : 'Restrict'));
  const onUpdate = action(part('onUpdate') ?? 'Cascade');
  return [
    `${model.table}: foreign key (${from.join(', ')}) to ${target.table} (${to.join(', ')}), ` +
      `on delete ${onDelete}, on update ${onUpdate}`,
  ];
}

function columnOf(model: Model, fieldName: string): string {
  const field = model.fields.find(({ name }) => name === fieldName);
  if (field === undefined) throw new Error(`${model.name} has no field ${fieldName}.`);
  const mapped = field.attributes.get('map');
  return mapped === undefined ? fieldName : unquoted(mapped);
}

/** `SetNull` as PostgreSQL writes it: `set null`. */
function action(name: string): string {
  return name.replaceAll(/(?<=[a-z])(?=[A-Z])/g, ' ').toLowerCase();
}

function listed(text: string): string[] {
  const content = /^\[(.*)\]$/.exec(text.trim())?.[1];
  if (content === undefined) throw new Error(`"${text}" is not a list of fields.`);
  return content.split(',').map((name) => name.trim());
}

function unquoted(text: string): string {
  const content = /^"(.*)"$/.exec(text)?.[1];
  if (content === undefined) throw new Error(`${text} is not a quoted name.`);
  return content;
}
