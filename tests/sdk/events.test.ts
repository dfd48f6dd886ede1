import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { eventsIn, linesIn } from '../../client-sdk/src/events.ts';

/** A stream of these bytes, cut where it is said. */
function streamOf(
  text: string,
  chunkLength = Number.POSITIVE_INFINITY,
): ReadableStream<Uint8Array> {
  const bytes = new TextEncoder().encode(text);
  const size = Math.min(chunkLength, bytes.length || 1);
  return new ReadableStream({
    start: (controller) => {
      for (let from = 0; from < bytes.length; from += size) {
        controller.enqueue(bytes.slice(from, from + size));
      }
      controller.close();
    },
  });
}

async function eventsOf(text: string, chunkLength?: number): Promise<[string, string][]> {
  const found: [string, string][] = [];
  for await (const { event, data } of eventsIn(streamOf(text, chunkLength))) {
    found.push([event, data]);
  }
  return found;
}

// published: WHATWG HTML Living Standard, 9.2.6 "Interpreting an event stream", its examples
describe('server-sent events', () => {
  const examples: [string, string, [string, string][]][] = [
    ['lines of data joined', 'data: YHOO\ndata: +2\ndata: 10\n\n', [['message', 'YHOO\n+2\n10']]],
    [
      'a comment, fields without a value, one space taken off',
      ': test stream\n\ndata: first event\nid: 1\n\ndata:second event\nid\n\n' +
        'data:  third event\n\n',
      [
        ['message', 'first event'],
        ['message', 'second event'],
        ['message', ' third event'],
      ],
    ],
    [
      'empty data, and a last block that is not ended',
      'data\n\ndata\ndata\n\ndata:',
      [
        ['message', ''],
        ['message', '\n'],
      ],
    ],
    [
      'the same event with and without a space',
      'data:test\n\ndata: test\n\n',
      [
        ['message', 'test'],
        ['message', 'test'],
      ],
    ],
    [
      'named events',
      'event: add\ndata: 73857293\n\nevent: remove\ndata: 2153\n\n',
      [
        ['add', '73857293'],
        ['remove', '2153'],
      ],
    ],
  ];

  it.each(examples)('give %s', async (_what, text, expected) => {
    expect(await eventsOf(text)).toEqual(expected);
    for (const end of ['\r\n', '\r']) {
      expect(await eventsOf(text.replaceAll('\n', end))).toEqual(expected);
      expect(await eventsOf(text.replaceAll('\n', end), 1)).toEqual(expected);
    }
  });
});

describe('lines of a stream', () => {
  it('do not depend on where the chunks are cut', async () => {
    await fc.assert(
      fc.asyncProperty(
        fc.array(fc.constantFrom('a', 'é', '🧤', '\n', '\r', '\r\n', ' '), { maxLength: 30 }),
        fc.integer({ min: 1, max: 7 }),
        async (parts, chunkLength) => {
          const text = parts.join('');
          const expected = text.split(/\r\n|\r|\n/);
          if (expected.at(-1) === '') expected.pop();
          const lines: string[] = [];
          for await (const line of linesIn(streamOf(text, chunkLength))) lines.push(line);
          expect(lines).toEqual(expected);
        },
      ),
    );
  });
});
