import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { ProblemError } from '#platform/problems.ts';
import { readRows, type UploadMediaType } from '#server/trials/read-rows.ts';
import { csvFields, csvSplitter } from '#server/trials/split-csv.ts';
import { jsonArraySplitter } from '#server/trials/split-json-array.ts';
import { lineSplitter } from '#server/trials/split-lines.ts';
import { ROW_BYTES_MAX, type RowSplitter } from '#server/trials/upload-row.ts';

/** Cuts a body that comes in chunks of so many bytes. */
function rowsOf(splitter: RowSplitter, body: string | Buffer, chunkBytes = 1_000_000) {
  const bytes = Buffer.from(body);
  const rows = [];
  for (let at = 0; at < bytes.length; at += chunkBytes) {
    // The memory of a chunk is used again, as the file reader does.
    const chunk = Buffer.from(bytes.subarray(at, at + chunkBytes));
    rows.push(...splitter.push(chunk));
    chunk.fill(0);
  }
  return [...rows, ...splitter.end()];
}

const records = (body: string, chunkBytes?: number) =>
  rowsOf(csvSplitter(), body, chunkBytes).map(({ text, fault }) => ({
    fields: fault === null ? csvFields(text).fields : null,
    fault: fault?.code ?? csvFields(text).fault?.code ?? null,
  }));

const fieldsOf = (body: string, chunkBytes?: number) =>
  records(body, chunkBytes).map(({ fields }) => fields);

// published: RFC 4180 section 2, the examples of rules 1 to 7, and the grammar after them.
describe('CSV as RFC 4180 has it', () => {
  it('ends each record with CRLF (rule 1), which the last may lack (rule 2)', () => {
    const expected = [
      ['aaa', 'bbb', 'ccc'],
      ['zzz', 'yyy', 'xxx'],
    ];
    expect(fieldsOf('aaa,bbb,ccc\r\nzzz,yyy,xxx\r\n')).toEqual(expected);
    expect(fieldsOf('aaa,bbb,ccc\r\nzzz,yyy,xxx')).toEqual(expected);
  });

  it('takes spaces as part of a field (rule 4)', () => {
    expect(fieldsOf('aaa , bbb,ccc')).toEqual([['aaa ', ' bbb', 'ccc']]);
  });

  it('reads fields in quotes and without (rule 5)', () => {
    expect(fieldsOf('"aaa","bbb","ccc"\r\nzzz,yyy,xxx')).toEqual([
      ['aaa', 'bbb', 'ccc'],
      ['zzz', 'yyy', 'xxx'],
    ]);
  });

  it('keeps line breaks and commas inside quotes (rule 6)', () => {
    expect(fieldsOf('"aaa","b\r\nbb","ccc"\r\nzzz,yyy,xxx')).toEqual([
      ['aaa', 'b\r\nbb', 'ccc'],
      ['zzz', 'yyy', 'xxx'],
    ]);
    expect(fieldsOf('"a,b",c')).toEqual([['a,b', 'c']]);
  });

  it('reads a doubled quote as one (rule 7)', () => {
    expect(fieldsOf('"aaa","b""bb","ccc"')).toEqual([['aaa', 'b"bb', 'ccc']]);
    expect(fieldsOf('"""",""')).toEqual([['"', '']]);
  });

  it('reads empty fields, and a bare line feed as the end of a record', () => {
    expect(fieldsOf('a,,\n,b,\n')).toEqual([
      ['a', '', ''],
      ['', 'b', ''],
    ]);
  });

  it('refuses quotes in the middle of a field and text after a closing one, and reads on', () => {
    expect(records('a"b,c\r\n"d"e,f\r\ng,h')).toEqual([
      { fields: null, fault: 'malformed-quotes' },
      { fields: null, fault: 'malformed-quotes' },
      { fields: ['g', 'h'], fault: null },
    ]);
  });

  it('gives up only the line whose quote is never closed', () => {
    expect(records('a,b\n"c,d\ne,f\ng,h\n')).toEqual([
      { fields: ['a', 'b'], fault: null },
      { fields: null, fault: 'unclosed-quote' },
      { fields: ['e', 'f'], fault: null },
      { fields: ['g', 'h'], fault: null },
    ]);
    const filler = `${'x'.repeat(1000)},y\n`.repeat(200);
    const long = records(`"open,b\n${filler}`);
    expect(long[0]?.fault).toBe('unclosed-quote');
    expect(long.slice(1).map(({ fault }) => fault)).toEqual(Array(200).fill(null));
  });

  // common practice, no source: what a writer that follows the RFC writes, a reader gets back.
  it('gets back what was written, wherever the chunks are cut', () => {
    const field = fc.string({ unit: fc.constantFrom('a', ' ', ',', '"', '\r', '\n', 'é', '𝄞') });
    const table = fc.array(fc.array(field, { minLength: 2, maxLength: 4 }), { maxLength: 6 });
    fc.assert(
      fc.property(table, fc.integer({ min: 1, max: 30 }), fc.boolean(), (rows, chunk, crlf) => {
        const quoted = (text: string) => `"${text.replaceAll('"', '""')}"`;
        const end = crlf ? '\r\n' : '\n';
        const body = rows.map((row) => `${row.map(quoted).join(',')}${end}`).join('');
        expect(fieldsOf(body, chunk)).toEqual(rows);
      }),
    );
  });
});

describe('a JSON array', () => {
  // published: RFC 8259 sections 2 to 5, arrays, white space and strings.
  it('is cut into its elements, wherever the chunks are cut', () => {
    const elements = fc.array(fc.jsonValue(), { maxLength: 8 });
    fc.assert(
      fc.property(elements, fc.integer({ min: 1, max: 40 }), fc.nat(3), (values, chunk, indent) => {
        const texts = rowsOf(jsonArraySplitter(), JSON.stringify(values, null, indent), chunk);
        expect(texts.map(({ text }) => JSON.parse(text))).toEqual(
          JSON.parse(JSON.stringify(values)),
        );
      }),
    );
  });

  it('gives an element that is no JSON as it stands, and the rest too', () => {
    const rows = rowsOf(jsonArraySplitter(), '[{"a":1}, oops, , {"b":"],\\""}]', 3);
    expect(rows.map(({ text }) => text)).toEqual(['{"a":1}', 'oops', '', '{"b":"],\\""}']);
  });

  it('is refused as a whole when it is none, does not end or goes on after its end', () => {
    for (const body of ['{"a":1}', '', '[1', '[{"a":1}', '["a]', '[1] 2']) {
      expect(() => rowsOf(jsonArraySplitter(), body), body).toThrow(ProblemError);
    }
    expect(rowsOf(jsonArraySplitter(), ' [ ] \n')).toEqual([]);
  });

  it('marks an element that is too long and reads on', () => {
    const long = `"${'x'.repeat(3 * ROW_BYTES_MAX)}"`;
    const rows = rowsOf(jsonArraySplitter(), `[1,${long},2]`, 5000);
    expect(rows.map(({ fault }) => fault?.code ?? null)).toEqual([null, 'row-too-long', null]);
    expect(rows[1]?.text.length).toBe(ROW_BYTES_MAX);
    expect(rows[2]?.text).toBe('2');
  });
});

describe('newline-delimited JSON', () => {
  // common practice, no source: line feeds between, CRLF and blank lines tolerated.
  it('is cut into lines, wherever the chunks are cut', () => {
    for (const chunk of [1, 2, 3, 7, 100]) {
      const rows = rowsOf(lineSplitter(), '{"a":1}\r\n\n{"b":"é"}\n  \n{"c":3}', chunk);
      expect(rows.map(({ text }) => text)).toEqual(['{"a":1}', '{"b":"é"}', '{"c":3}']);
    }
  });

  it('marks a line that is too long or not UTF-8 and reads on', () => {
    const long = 'x'.repeat(3 * ROW_BYTES_MAX);
    const rows = rowsOf(lineSplitter(), `1\n${long}\n2\n`, 5000);
    expect(rows.map(({ fault }) => fault?.code ?? null)).toEqual([null, 'row-too-long', null]);
    const bytes = Buffer.concat([Buffer.from('1\n"'), Buffer.from([0xe9]), Buffer.from('"\n2')]);
    const odd = rowsOf(lineSplitter(), bytes);
    expect(odd.map(({ fault }) => fault?.code ?? null)).toEqual([null, 'not-utf-8', null]);
    expect(odd[1]?.text).toBe('"é"');
  });
});

describe('rows', () => {
  const read = async (body: string, mediaType: UploadMediaType) => {
    async function* chunks() {
      yield Buffer.from(body);
    }
    const measures = new Set(['time', 'drops']);
    const batch = { rows: 2, characters: 1000 };
    const batches = [];
    for await (const rows of readRows(chunks(), { mediaType, measures, batch })) batches.push(rows);
    return batches;
  };

  it('are numbered from 1 over the data, in batches', async () => {
    const batches = await read('1\n\n2\n3\n', 'application/x-ndjson');
    expect(batches.map((rows) => rows.map(({ number }) => number))).toEqual([[1, 2], [3]]);
  });

  it('of CSV have the columns of the header, empty ones not given', async () => {
    const header = 'time,participant,period,repetition,condition,recordId,startedAt,missing.drops';
    const batches = await read(
      `${header}\n12.5,P1,1,2,a,r1,2026-01-01T00:00:00Z,not-taken\n,P2,x,1,a,r2,t,\nshort\n`,
      'text/csv',
    );
    const [first, second, third] = batches.flat();
    expect(first?.fields).toMatchObject({ participant: 'P1', period: 1, repetition: 2 });
    expect([...(first?.fields?.values ?? [])]).toEqual([['time', 12.5]]);
    expect([...(first?.fields?.missing ?? [])]).toEqual([['drops', 'not-taken']]);
    expect(second).toMatchObject({ participant: 'P2', fields: null });
    expect(second?.faults).toMatchObject([{ pointer: '/period', code: 'not-a-whole-number' }]);
    expect(third?.faults).toMatchObject([{ code: 'wrong-field-count' }]);
  });

  it('of CSV need a right header, every fault of which is named', async () => {
    const refused = async (body: string) => {
      try {
        await read(body, 'text/csv');
      } catch (error) {
        if (error instanceof ProblemError) {
          return error.faults?.map(({ pointer, code }) => `${pointer} ${code}`);
        }
      }
      return null;
    };
    expect(await refused('')).toEqual(['/header column-needed']);
    expect(
      await refused('participant,period,period,speed,repetition,condition,recordId\n'),
    ).toEqual(['/header/2 double-column', '/header/3 unknown-column', '/header column-needed']);
    const semicolons = await refused('participant;period;repetition;condition;recordId;startedAt');
    expect(semicolons?.[0]).toBe('/header/0 unknown-column');
  });
});
