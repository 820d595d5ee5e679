import { createServer, type IncomingMessage, type Server, type ServerResponse } from 'node:http';
import type { AddressInfo } from 'node:net';

/** A request that is refused, with what is wrong in plain words. */
export class Refused extends Error {
  constructor(
    readonly status: number,
    message: string,
    readonly errors: { path: string; message: string }[] = [],
  ) {
    super(message);
  }
}

export interface Request {
  method: string;
  /** Path, decoded, without the query. */
  path: string;
  query: URLSearchParams;
  /** The JSON body; `undefined` without one. */
  body: unknown;
}

export type Answer = { json: unknown; status?: number } | { html: string };

const LARGEST_BODY = 100_000;

/**
 * A small HTTP server on the loopback address for one function that answers everything.
 *
 * @param port 0 takes any free one
 * @returns the server once it listens, and its port
 */
export async function serveLoopback(
  port: number,
  answer: (request: Request) => Answer | Promise<Answer>,
): Promise<{ server: Server; port: number; close: () => Promise<void> }> {
  const server = createServer((incoming, response) => {
    handle(incoming, answer)
      .then((given) => send(response, given))
      .catch((error: unknown) => {
        const refused = error instanceof Refused ? error : new Refused(500, String(error));
        send(response, {
          status: refused.status,
          json: {
            title: refused.status < 500 ? 'Refused' : 'Failed',
            status: refused.status,
            detail: refused.message,
            ...(refused.errors.length > 0 && { errors: refused.errors }),
          },
        });
      });
  });
  await new Promise<void>((listening, failed) => {
    server.once('error', failed);
    server.listen(port, '127.0.0.1', listening);
  });
  return {
    server,
    port: (server.address() as AddressInfo).port,
    close: () =>
      new Promise((closed) => {
        server.close(() => closed());
        server.closeAllConnections();
      }),
  };
}

async function handle(
  incoming: IncomingMessage,
  answer: (request: Request) => Answer | Promise<Answer>,
): Promise<Answer> {
  let url: URL;
  let path: string;
  try {
    url = new URL(incoming.url ?? '/', 'http://127.0.0.1');
    path = decodeURIComponent(url.pathname);
  } catch {
    throw new Refused(400, 'the path is not valid, or not valid percent-encoding');
  }
  return answer({
    method: incoming.method ?? 'GET',
    path,
    query: url.searchParams,
    body: await bodyOf(incoming),
  });
}

async function bodyOf(incoming: IncomingMessage): Promise<unknown> {
  const chunks: Buffer[] = [];
  let size = 0;
  for await (const chunk of incoming as AsyncIterable<Buffer>) {
    size += chunk.length;
    if (size > LARGEST_BODY) throw new Refused(413, `the body is longer than ${LARGEST_BODY} bytes`);
    chunks.push(chunk);
  }
  if (size === 0) return undefined;
  try {
    return JSON.parse(Buffer.concat(chunks).toString('utf8')) as unknown;
  } catch (error) {
    throw new Refused(400, `the body is not JSON (${(error as Error).message})`);
  }
}

function send(response: ServerResponse, answer: Answer): void {
  const [status, type, text] =
    'html' in answer
      ? [200, 'text/html; charset=utf-8', answer.html]
      : [answer.status ?? 200, 'application/json; charset=utf-8', JSON.stringify(answer.json)];
  response.writeHead(status, {
    'content-type': type,
    'cache-control': 'no-store',
    'x-content-type-options': 'nosniff',
  });
  response.end(text);
}

/** The body as an object with no other keys than those named, or refused. */
export function objectBody(body: unknown, keys: readonly string[]): Record<string, unknown> {
  if (typeof body !== 'object' || body === null || Array.isArray(body))
    throw new Refused(400, `the body must be a JSON object with ${keys.join(', ')}`);
  const unknown = Object.keys(body).filter((key) => !keys.includes(key));
  if (unknown.length > 0)
    throw new Refused(
      400,
      'the body has keys that mean nothing here',
      unknown.map((path) => ({ path, message: 'is not known' })),
    );
  return body as Record<string, unknown>;
}
