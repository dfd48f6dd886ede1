import http, { type IncomingMessage, type ServerResponse } from 'node:http';
import type { AddressInfo } from 'node:net';

/** What is done to one request on its way. */
export type LinkFault =
  /** The connection is cut before the service has seen the request. */
  | 'cut-before'
  /** The service has answered in full; the connection is cut before anybody hears of it. */
  | 'cut-after'
  /** The status line and half of the answer come through, then the connection is cut. */
  | 'cut-within'
  | { readonly status: number; readonly headers?: Readonly<Record<string, string>> };

export interface FaultyProxy {
  readonly url: string;
  /** Faults of the next requests, first to come first; after them all goes through. */
  readonly faults: LinkFault[];
  /** While true, every connection is cut at once. */
  down: boolean;
  /** Requests that came, as `METHOD path`, in order, with their Idempotency-Key. */
  readonly seen: { readonly request: string; readonly key: string | undefined }[];
  close(): Promise<void>;
}

/** A link on this machine that can be made to fail, request by request. */
export async function startFaultyProxy(target: string): Promise<FaultyProxy> {
  const proxy = { faults: [] as LinkFault[], down: false, seen: [] as FaultyProxy['seen'] };
  const server = http.createServer((request, response) => {
    if (proxy.down) {
      request.socket.destroy();
      return;
    }
    const key = request.headers['idempotency-key']?.toString();
    proxy.seen.push({ request: `${request.method} ${request.url}`, key });
    const fault = proxy.faults.shift();
    if (fault === 'cut-before') request.socket.destroy();
    else if (typeof fault === 'object') refuse(request, response, fault);
    else void forward(target, request, response, fault);
  });
  await new Promise<void>((done) => server.listen(0, '127.0.0.1', done));
  const { port } = server.address() as AddressInfo;
  return Object.assign(proxy, {
    url: `http://127.0.0.1:${port}`,
    close: () =>
      new Promise<void>((done) => {
        server.close(() => done());
        server.closeAllConnections();
      }),
  });
}

function refuse(
  request: IncomingMessage,
  response: ServerResponse,
  { status, headers }: { status: number; headers?: Readonly<Record<string, string>> },
): void {
  request.resume();
  request.on('end', () => response.writeHead(status, headers).end('Not now.'));
}

async function forward(
  target: string,
  request: IncomingMessage,
  response: ServerResponse,
  fault: 'cut-after' | 'cut-within' | undefined,
): Promise<void> {
  const outgoing = http.request(new URL(request.url ?? '/', target), {
    method: request.method,
    headers: { ...request.headers, host: new URL(target).host },
  });
  request.pipe(outgoing);
  outgoing.on('error', () => request.socket.destroy());
  outgoing.on('response', (answer) => {
    if (fault === undefined) {
      response.writeHead(answer.statusCode ?? 502, answer.headers);
      answer.pipe(response);
      return;
    }
    const chunks: Buffer[] = [];
    answer.on('data', (chunk: Buffer) => chunks.push(chunk));
    answer.on('end', () => {
      if (fault === 'cut-after') {
        request.socket.destroy();
        return;
      }
      const body = Buffer.concat(chunks);
      response.writeHead(answer.statusCode ?? 502, answer.headers);
      response.write(body.subarray(0, Math.floor(body.length / 2)), () => request.socket.destroy());
    });
  });
}
