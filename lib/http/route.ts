import type { z } from "zod";
import { AppError } from "@/lib/errors";
import { requireActor, type Actor, type RoleSpec } from "@/lib/auth/actor";
import { env } from "@/lib/env";
import { problemResponse } from "./problem";

type Parsed<S> = S extends z.ZodType ? z.output<S> : undefined;

type Spec<P, B, Q> = {
  /** Who may call: a role, several, "any" signed-in person, or "public". */
  role: RoleSpec;
  params?: P;
  body?: B;
  query?: Q;
  bodyBytesMax?: number;
};

type Call<P, B, Q> = {
  actor: Actor;
  params: Parsed<P>;
  body: Parsed<B>;
  query: Parsed<Q>;
  request: Request;
};

const BODY_BYTES_MAX = 256_000;

/**
 * Who, then what, then do. Every failure leaves as an RFC 9457 problem document: 401 and 403 before the
 * body is read, 422 with pointers for wrong input, the use case's own code, 500 for bugs.
 */
export function route<
  P extends z.ZodType | undefined = undefined,
  B extends z.ZodType | undefined = undefined,
  Q extends z.ZodType | undefined = undefined,
>(spec: Spec<P, B, Q>, handle: (call: Call<P, B, Q>) => Response | Promise<Response>) {
  return async (request: Request, context: { params: Promise<unknown> }): Promise<Response> => {
    try {
      const actor = await requireActor(spec.role);
      refuseForeignOrigin(request);
      const params = spec.params ? spec.params.parse(await context.params) : undefined;
      const query = spec.query
        ? spec.query.parse(Object.fromEntries(new URL(request.url).searchParams))
        : undefined;
      const body = spec.body
        ? spec.body.parse(await readJson(request, spec.bodyBytesMax ?? BODY_BYTES_MAX))
        : undefined;
      return await handle({
        actor,
        params: params as Parsed<P>,
        body: body as Parsed<B>,
        query: query as Parsed<Q>,
        request,
      });
    } catch (error) {
      return problemResponse(error);
    }
  };
}

/** A cookie travels with any request; one that changes something must come from our own pages. */
function refuseForeignOrigin(request: Request): void {
  if (request.method === "GET" || request.method === "HEAD") return;
  const origin = request.headers.get("origin");
  if (!origin) return; // not a browser, or same-origin in one that leaves it out
  const allowed = new URL(env().APP_URL).origin;
  // "null" (a sandboxed frame, a redirect across sites) and what is no address are foreign too.
  const host = URL.canParse(origin) ? new URL(origin).host : null;
  if (origin !== allowed && (host === null || host !== request.headers.get("host"))) {
    throw new AppError("forbidden", "This request came from another site.");
  }
}

async function readJson(request: Request, bytesMax: number): Promise<unknown> {
  const announced = Number(request.headers.get("content-length") ?? 0);
  if (announced > bytesMax) throw new AppError("too_large", `The request is over ${bytesMax} bytes.`);
  const reader = request.body?.getReader();
  if (!reader) return undefined;
  const chunks: Uint8Array[] = [];
  let size = 0;
  for (;;) {
    const { done, value } = await reader.read();
    if (done) break;
    size += value.byteLength;
    if (size > bytesMax) {
      await reader.cancel();
      throw new AppError("too_large", `The request is over ${bytesMax} bytes.`);
    }
    chunks.push(value);
  }
  if (size === 0) return undefined;
  try {
    return JSON.parse(Buffer.concat(chunks).toString("utf8"));
  } catch (cause) {
    throw new AppError("invalid", "The request is not JSON.", {}, { cause });
  }
}

export function ok(value: unknown): Response {
  return Response.json(value, { headers: { "cache-control": "no-store" } });
}

export function created(location: string, value: unknown): Response {
  return Response.json(value, { status: 201, headers: { location, "cache-control": "no-store" } });
}
