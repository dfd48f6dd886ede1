/** One server-sent event. */
export interface ServerSentEvent {
  readonly event: string;
  readonly data: string;
}

/**
 * Reads a stream of server-sent events. Source: WHATWG HTML, "Server-sent events", interpreting an
 * event stream; ids and retry times are not used here.
 *
 * @param onLine called for every line, comments included: a sign of life
 */
export async function* eventsIn(
  body: ReadableStream<Uint8Array>,
  onLine: () => void = () => undefined,
): AsyncGenerator<ServerSentEvent, void, undefined> {
  let event = '';
  let data: string[] = [];
  for await (const line of linesIn(body)) {
    onLine();
    if (line === '') {
      if (data.length > 0) yield { event: event === '' ? 'message' : event, data: data.join('\n') };
      event = '';
      data = [];
      continue;
    }
    const colon = line.indexOf(':');
    const field = colon === -1 ? line : line.slice(0, colon);
    const value = colon === -1 ? '' : line.slice(colon + 1).replace(/^ /, '');
    if (field === 'event') event = value;
    else if (field === 'data') data.push(value);
  }
}

/**
 * The lines of a UTF-8 stream, ended by CR, LF or both. What follows the last end of line is a line
 * too, unless it is empty.
 */
export async function* linesIn(
  body: ReadableStream<Uint8Array>,
): AsyncGenerator<string, void, undefined> {
  const decoder = new TextDecoder();
  const reader = body.getReader();
  let rest = '';
  try {
    for (;;) {
      const { done, value } = await reader.read();
      rest += decoder.decode(value, { stream: !done });
      // A CR at the very end may be the first half of a CR LF.
      const cut = !done && rest.endsWith('\r') ? rest.length - 1 : rest.length;
      const lines = rest.slice(0, cut).split(/\r\n|\r|\n/);
      rest = (lines.pop() ?? '') + rest.slice(cut);
      yield* lines;
      if (done) break;
    }
    if (rest !== '') yield rest;
  } finally {
    await reader.cancel();
  }
}
