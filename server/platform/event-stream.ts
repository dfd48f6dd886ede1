import type { FastifyInstance, FastifyReply } from 'fastify';

/** A comment line this often keeps proxies from closing a quiet connection. */
const HEARTBEAT_MS = 15_000;

/**
 * A stream ends after this long at the latest, and its client connects again: a token that was
 * revoked or expired in the meantime is then noticed.
 */
const STREAM_MS_MAX = 10 * 60_000;

/** A client that does not read is let go rather than buffered for. */
const UNREAD_BYTES_MAX = 1_000_000;

/** One open stream of server-sent events (HTML Living Standard, section 9.2). */
export interface EventStream {
  /** Sends one event; `data` goes out as JSON on one line. */
  send(event: string, data: unknown): void;
  close(): void;
  /** Called once, whoever ended the stream: us, the client, or the server's shutdown. */
  onClose(listener: () => void): void;
}

/**
 * Opens event streams for one app and ends those still open when the app closes, since a server
 * otherwise waits for its last response.
 */
export function eventStreams(app: FastifyInstance): (reply: FastifyReply) => EventStream {
  const open = new Set<EventStream>();
  app.addHook('preClose', async () => {
    for (const stream of open) stream.close();
  });
  return (reply) => {
    const stream = openStream(reply);
    open.add(stream);
    stream.onClose(() => open.delete(stream));
    return stream;
  };
}

function openStream(reply: FastifyReply): EventStream {
  const listeners: (() => void)[] = [];
  let closed = false;
  reply.hijack();
  const { raw } = reply;
  raw.writeHead(200, {
    ...headersOf(reply),
    'content-type': 'text/event-stream; charset=utf-8',
    'cache-control': 'no-store',
    // Proxies that buffer answers by default are asked not to.
    'x-accel-buffering': 'no',
  });
  const write = (text: string) => {
    if (closed) return;
    raw.write(text);
    if (raw.writableLength > UNREAD_BYTES_MAX) raw.destroy();
  };
  const heartbeat = setInterval(() => write(':\n\n'), HEARTBEAT_MS);
  const limit = setTimeout(() => raw.end(), STREAM_MS_MAX);
  const ended = () => {
    if (closed) return;
    closed = true;
    clearInterval(heartbeat);
    clearTimeout(limit);
    for (const listener of listeners) listener();
  };
  raw.once('close', ended);
  raw.once('error', ended);
  return {
    send: (event, data) => write(`event: ${event}\ndata: ${JSON.stringify(data)}\n\n`),
    close: () => {
      raw.end();
      ended();
    },
    onClose: (listener) => {
      if (closed) listener();
      else listeners.push(listener);
    },
  };
}

/** Headers that hooks set before the reply was taken over: request id, security headers. */
function headersOf(reply: FastifyReply): Record<string, number | string | string[]> {
  const headers: Record<string, number | string | string[]> = {};
  for (const [name, value] of Object.entries(reply.getHeaders())) {
    if (value !== undefined) headers[name] = value;
  }
  return headers;
}
