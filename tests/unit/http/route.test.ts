import { encode } from "next-auth/jwt";
import { beforeEach, describe, expect, it, vi } from "vitest";
import { z } from "zod";
import type { Db } from "@/db/client";
import { findUser } from "@/db/queries/people";
import type { Role } from "@/lib/auth/actor";
import { env } from "@/lib/env";
import { AppError, InvariantError, STATUS_OF, type ErrorCode } from "@/lib/errors";
import { toProblem } from "@/lib/http/problem";
import { created, ok, route } from "@/lib/http/route";
import { freshDb } from "@/tests/support/db";
import { person } from "@/tests/support/market";

const cookie = vi.hoisted(() => ({ value: undefined as string | undefined }));
vi.mock("next/headers", () => ({
  cookies: () =>
    Promise.resolve({ get: () => (cookie.value === undefined ? undefined : { value: cookie.value }) }),
}));

let db: Db;
beforeEach(() => {
  db = freshDb();
  cookie.value = undefined;
  vi.stubEnv("LOG_LEVEL", "silent");
});

const signIn = async (role: Role) => {
  const actor = person(db, role);
  const epoch = findUser(db, actor.id)?.sessionEpoch;
  cookie.value = await encode({ token: { sub: actor.id, epoch }, secret: env().AUTH_SECRET });
  return actor;
};

const Body = z.object({ cents: z.int().min(1, "At least one cent.") });
const echo = route(
  { role: "requester", params: z.object({ id: z.string().min(5) }), body: Body },
  ({ actor, body }) => ok({ id: actor.id, cents: body.cents }),
);
const post = (body: string, headers: Record<string, string> = {}) =>
  echo(new Request("http://127.0.0.1:3000/api/things/thing_1", { method: "POST", body, headers }), {
    params: Promise.resolve({ id: "thing_1" }),
  });
const failing = (error: unknown) =>
  route({ role: "public" }, () => {
    throw error;
  })(new Request("http://127.0.0.1:3000/api/things"), { params: Promise.resolve({}) });

async function problemOf(response: Response) {
  expect(response.headers.get("content-type")).toBe("application/problem+json");
  expect(response.headers.get("cache-control")).toBe("no-store");
  const problem = (await response.json()) as ReturnType<typeof toProblem>;
  expect(problem.status).toBe(response.status);
  expect(problem.type).toMatch(/^\/problems\/[a-z-]+$/);
  return problem;
}

describe("a route", () => {
  it("answers who may and asks rightly", async () => {
    const actor = await signIn("requester");
    const response = await post('{"cents":5}', { origin: "http://127.0.0.1:3000" });
    expect([response.status, await response.json()]).toEqual([200, { id: actor.id, cents: 5 }]);
  });

  it("asks for a session before it looks at anything else: 401", async () => {
    expect(await problemOf(await post("{"))).toMatchObject({
      status: 401,
      type: "/problems/unauthenticated",
    });
  });

  it("is closed to other roles: 403", async () => {
    await signIn("annotator");
    expect(await problemOf(await post("{"))).toMatchObject({ status: 403, type: "/problems/forbidden" });
  });

  it.each(["https://elsewhere.example", "null", "nonsense"])(
    "is closed to another site's page (%s): 403",
    async (origin) => {
      await signIn("requester");
      expect(await problemOf(await post('{"cents":5}', { origin }))).toMatchObject({ status: 403 });
    },
  );

  it("lets a page of the very host through, and reading from anywhere", async () => {
    await signIn("requester");
    const proxied = { origin: "https://merestone.example", host: "merestone.example" };
    expect((await post('{"cents":5}', proxied)).status).toBe(200);
    const read = route({ role: "requester" }, () => ok({}));
    const request = new Request("http://127.0.0.1:3000/api/x", {
      headers: { origin: "https://elsewhere.example" },
    });
    expect((await read(request, { params: Promise.resolve({}) })).status).toBe(200);
  });

  it("points at what is wrong in the body: 422", async () => {
    await signIn("requester");
    expect(await problemOf(await post('{"cents":0}'))).toMatchObject({
      status: 422,
      type: "/problems/invalid",
      detail: "At least one cent.",
      errors: [{ pointer: "/cents", detail: "At least one cent." }],
    });
    for (const body of ["", "{", "[]", '"text"', "null"])
      expect((await problemOf(await post(body))).status).toBe(422);
  });

  it("refuses a body that is too large, announced or not: 413", async () => {
    await signIn("requester");
    const large = JSON.stringify({ cents: 1, text: "x".repeat(256_000) });
    expect((await problemOf(await post(large))).status).toBe(413);
    expect((await problemOf(await post("{}", { "content-length": "256001" }))).status).toBe(413);
  });

  it.each(Object.entries(STATUS_OF) as [ErrorCode, number][])("says %s as %d", async (code, status) => {
    const problem = await problemOf(await failing(new AppError(code, "In words.", { field: "This one." })));
    expect(problem).toMatchObject({
      status,
      detail: "In words.",
      errors: [{ pointer: "/field", detail: "This one." }],
    });
    expect(problem.type).toBe(`/problems/${code.replaceAll("_", "-")}`);
  });

  it("shows nothing of a bug but a number to quote: 500", async () => {
    const problem = await problemOf(await failing(new InvariantError("escrow of bat_1 is -5")));
    expect(problem).toMatchObject({ status: 500, type: "/problems/bug" });
    expect(JSON.stringify(problem)).not.toMatch(/escrow|bat_1|Invariant/);
    expect(problem.detail).toContain(problem.requestId);
  });

  it("says where a created thing is: 201", () => {
    const response = created("/api/things/1", { id: 1 });
    expect([response.status, response.headers.get("location")]).toEqual([201, "/api/things/1"]);
  });
});
