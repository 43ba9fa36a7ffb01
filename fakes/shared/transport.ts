import { createServer, type IncomingMessage, type ServerResponse } from "node:http";
import type { AddressInfo } from "node:net";
import { Readable } from "node:stream";
import { pipeline } from "node:stream/promises";

/** One request as it stood on the wire: `target` is never normalised, or signatures would not verify. */
export type Call = {
  method: string;
  target: string;
  /** Up to the question mark, still percent-encoded. */
  path: string;
  /** After the question mark, still percent-encoded. */
  query: string;
  /** Lower-case names; a repeated header is joined with commas. */
  headers: Record<string, string>;
  body: AsyncIterable<Uint8Array>;
};

export type Answer = {
  status: number;
  headers?: Record<string, string>;
  body?: string | Uint8Array | Readable;
  /** The connection is cut instead of answered: what a client sees when an answer is lost. */
  dropped?: true;
};

/** A service without a transport: the same for a socket, a test and an msw handler. */
export type Core = (call: Call) => Promise<Answer>;

export type Served = { port: number; url: string; close: () => Promise<void> };

const LOOPBACK = "127.0.0.1";

export function callOf(
  method: string,
  target: string,
  headers: Record<string, string>,
  body: AsyncIterable<Uint8Array>,
): Call {
  const cut = target.indexOf("?");
  return {
    method,
    target,
    path: cut < 0 ? target : target.slice(0, cut),
    query: cut < 0 ? "" : target.slice(cut + 1),
    headers,
    body,
  };
}

/** A stand-in never runs beside real money: it refuses production unless the demo is meant. */
export function refuseProduction(): void {
  if (process.env.NODE_ENV === "production" && process.env.MERESTONE_DEMO !== "1") {
    throw new Error("The local stand-ins do not start with NODE_ENV=production unless MERESTONE_DEMO=1.");
  }
}

/** Serves a core on the loopback address only. Port 0 takes any free one. */
export async function serve(core: Core, port = 0): Promise<Served> {
  refuseProduction();
  const server = createServer((request, response) => void respond(core, request, response));
  // Presigned uploads over slow links may take long; nobody but this machine can hold a socket open.
  server.requestTimeout = 0;
  await new Promise<void>((resolve, reject) => {
    server.once("error", reject);
    server.listen(port, LOOPBACK, resolve);
  });
  const taken = (server.address() as AddressInfo).port;
  return {
    port: taken,
    url: `http://${LOOPBACK}:${taken}`,
    close: () =>
      new Promise((resolve) => {
        server.close(() => resolve());
        server.closeAllConnections();
      }),
  };
}

async function respond(core: Core, request: IncomingMessage, response: ServerResponse): Promise<void> {
  let answer: Answer;
  try {
    const headers: Record<string, string> = {};
    for (const [name, values] of Object.entries(request.headersDistinct))
      headers[name] = (values ?? []).join(",");
    answer = await core(callOf(request.method ?? "GET", request.url ?? "/", headers, request));
  } catch (error) {
    if (request.destroyed || response.destroyed) return; // the client went away in mid-upload
    console.error(error);
    answer = {
      status: 500,
      headers: { "content-type": "text/plain" },
      body: "The stand-in failed; see its log.\n",
    };
  }
  if (answer.dropped) return void request.socket.destroy();
  // What was not read of a refused body is read and thrown away, so that the client sees the answer.
  request.resume();
  const { body } = answer;
  if (body instanceof Readable) {
    response.writeHead(answer.status, answer.headers);
    await pipeline(body, response).catch(() => undefined); // a client that stops reading is no error of ours
    return;
  }
  const bytes = body === undefined ? undefined : Buffer.from(body);
  const length = bytes && request.method !== "HEAD" ? { "content-length": String(bytes.length) } : {};
  response.writeHead(answer.status, { ...length, ...answer.headers });
  response.end(request.method === "HEAD" ? undefined : bytes);
}

/** An msw resolver in front of a core: `http.all("https://host/*", fromRequest(core))`. */
export function fromRequest(core: Core): (info: { request: Request }) => Promise<Response> {
  return async ({ request }) => {
    const url = new URL(request.url);
    const headers: Record<string, string> = { host: url.host };
    request.headers.forEach((value, name) => (headers[name] = value));
    const bytes = request.body ? new Uint8Array(await request.arrayBuffer()) : new Uint8Array();
    const answer = await core(callOf(request.method, url.pathname + url.search, headers, only(bytes)));
    if (answer.dropped) return Response.error();
    const { body } = answer;
    const content = body instanceof Readable ? new Uint8Array(await readAll(body)) : (body ?? null);
    const hasNoBody = answer.status === 204 || answer.status === 304 || request.method === "HEAD";
    return new Response(hasNoBody || content === null ? null : Buffer.from(content), {
      status: answer.status,
      headers: answer.headers ?? {},
    });
  };
}

/** A body that is already in memory. */
export async function* only(bytes: Uint8Array): AsyncGenerator<Uint8Array> {
  if (bytes.length > 0) yield bytes;
}

export class BodyTooLarge extends Error {}

/** Reads a whole body that is known to be small. */
export async function readAll(body: AsyncIterable<Uint8Array>, bytesMax = 16_000_000): Promise<Buffer> {
  const chunks: Uint8Array[] = [];
  let size = 0;
  for await (const chunk of body) {
    size += chunk.length;
    if (size > bytesMax) throw new BodyTooLarge(`The body is longer than ${bytesMax} bytes.`);
    chunks.push(chunk);
  }
  return Buffer.concat(chunks);
}

export const json = (status: number, value: unknown, headers: Record<string, string> = {}): Answer => ({
  status,
  headers: { "content-type": "application/json", ...headers },
  body: JSON.stringify(value),
});

export const html = (status: number, body: string): Answer => ({
  status,
  headers: {
    "content-type": "text/html; charset=utf-8",
    "x-content-type-options": "nosniff",
    "cache-control": "no-store",
    "referrer-policy": "no-referrer",
  },
  body,
});

export const redirect = (location: string): Answer => ({
  status: 303,
  headers: { location, "cache-control": "no-store" },
  body: "",
});
