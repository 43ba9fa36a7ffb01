import { createServer } from "node:http";
import type { AddressInfo } from "node:net";
import type { Resend } from "resend";
import { Webhook } from "standardwebhooks";
import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import { createResend } from "@/fakes/resend/service";
import { createResendClient } from "@/lib/services/resend";
import {
  RESEND_KEY,
  clientsOf,
  control,
  eventually,
  interceptHosts,
  startTestFakes,
  type TestFakes,
} from "@/tests/support/fakes";

let fakes: TestFakes;
let resend: Resend;
beforeAll(async () => {
  fakes = await startTestFakes();
  ({ resend } = clientsOf(fakes));
});
afterAll(() => fakes.remove());
beforeEach(() => control(fakes.resend, "reset"));

const letter = {
  from: "Merestone <post@merestone.example>",
  to: "mara@example.com",
  subject: "Your payout",
  text: "It is on its way: https://a.example/x?y=1",
  html: '<p>On its <a href="https://a.example/x?y=1&amp;z=2">way</a></p>',
};
type Listed = {
  id: string;
  subject: string;
  to: string[];
  status: string;
  links: string[];
  idempotencyKey: string | null;
};
const list = async (query = "") =>
  ((await (await fetch(`${fakes.resend.url}/api/mails${query}`)).json()) as { mails: Listed[] }).mails;
const pageOf = async (path: string) => (await fetch(`${fakes.resend.url}${path}`)).text();

describe("sending", () => {
  it("keeps a letter and tells what became of it", async () => {
    const { data, error } = await resend.emails.send({
      ...letter,
      tags: [{ name: "kind", value: "payout" }],
    });
    expect(error).toBeNull();
    const { data: found } = await resend.emails.get(data?.id ?? "");
    expect(found).toMatchObject({
      object: "email",
      id: data?.id,
      to: ["mara@example.com"],
      subject: "Your payout",
      last_event: "delivered",
      tags: [{ name: "kind", value: "payout" }],
    });
    expect(await list("?to=MARA&tag=kind:payout")).toMatchObject([
      {
        subject: "Your payout",
        status: "delivered",
        links: ["https://a.example/x?y=1&z=2", "https://a.example/x?y=1"],
      },
    ]);
    expect(await list("?to=nobody")).toEqual([]);
  });

  it("takes a batch whole or not at all", async () => {
    const { data } = await resend.batch.send([letter, { ...letter, to: "ines@example.com" }]);
    expect(data?.data).toHaveLength(2);
    const { error } = await resend.batch.send([letter, { ...letter, to: "no address" }]);
    expect(error).toMatchObject({ name: "validation_error", statusCode: 422 });
    expect(await list()).toHaveLength(2);
  });

  it.each([
    [{ subject: "" }, 422, "missing_required_field"],
    [{ to: [] as string[] }, 422, "missing_required_field"],
    [{ text: "", html: "" }, 422, "missing_required_field"],
    [{ from: "nobody" }, 422, "invalid_from_address"],
    [{ to: "nobody" }, 422, "validation_error"],
    [{ tags: [{ name: "a b", value: "c" }] }, 422, "validation_error"],
  ])("refuses %j", async (extra, statusCode, name) => {
    const { data, error } = await resend.emails.send({ ...letter, ...extra });
    expect(data).toBeNull();
    expect(error).toMatchObject({ statusCode, name });
    expect(await list()).toEqual([]);
  });

  it("wants a key, and the right one", async () => {
    const bare = await fetch(`${fakes.resend.url}/emails`, { method: "POST", body: JSON.stringify(letter) });
    expect([bare.status, await bare.json()]).toMatchObject([401, { name: "missing_api_key" }]);
    const { error } = await createResendClient({ apiKey: "re_other", baseUrl: fakes.resend.url }).emails.send(
      letter,
    );
    expect(error).toMatchObject({ statusCode: 403, name: "invalid_api_key" });
  });
});

describe("an idempotency key", () => {
  const send = (key: string, extra = {}) =>
    resend.emails.send({ ...letter, ...extra }, { idempotencyKey: key });

  it("sends once, replays the answer, and refuses another body for a day", async () => {
    const [one, two] = [await send("k1"), await send("k1")];
    expect(two.data?.id).toBe(one.data?.id);
    expect((await send("k1", { subject: "Other" })).error).toMatchObject({
      statusCode: 409,
      name: "invalid_idempotent_request",
    });
    expect(await list()).toMatchObject([{ idempotencyKey: "k1" }]);
    await control(fakes.resend, "clock", { advanceMs: 86_400_001 });
    expect((await send("k1")).data?.id).not.toBe(one.data?.id);
  });

  it("has at most 256 characters, and serves one request at a time", async () => {
    expect((await send("k".repeat(257))).error).toMatchObject({
      statusCode: 400,
      name: "invalid_idempotency_key",
    });
    await control(fakes.resend, "fault", {
      match: "POST /emails",
      when: "inside",
      action: "delay",
      delayMs: 150,
    });
    const first = send("k2");
    await new Promise((resolve) => setTimeout(resolve, 50));
    expect((await send("k2")).error).toMatchObject({
      statusCode: 409,
      name: "concurrent_idempotent_requests",
    });
    expect((await first).error).toBeNull();
  });

  it("sends once when the answer is lost", async () => {
    await control(fakes.resend, "fault", { match: "POST /emails", when: "after", action: "drop" });
    expect((await send("k3")).error).not.toBeNull();
    expect((await send("k3")).error).toBeNull();
    expect(await list()).toHaveLength(1);
  });
});

describe("faults", () => {
  it("limit the rate, with the time to wait", async () => {
    await control(fakes.resend, "settings", { perSecond: 2 });
    const answers = [
      await resend.emails.send(letter),
      await resend.emails.send(letter),
      await resend.emails.send(letter),
    ];
    expect(answers.map(({ error }) => error?.name ?? "sent")).toEqual([
      "sent",
      "sent",
      "rate_limit_exceeded",
    ]);
    expect(answers[2]?.headers?.["retry-after"]).toBe("1");
  });

  it("fail the next send, by the button of the mailbox too", async () => {
    await fetch(`${fakes.resend.url}/fail-next`, { method: "POST" });
    expect(await pageOf("/")).toContain("The next send fails");
    expect((await resend.emails.send(letter)).error).toMatchObject({
      statusCode: 500,
      name: "internal_server_error",
    });
    expect((await resend.emails.send(letter)).error).toBeNull();
  });

  it("bounce a letter, by test address and by the button of its page", async () => {
    await resend.emails.send({ ...letter, to: "bounced@resend.dev" });
    const { data } = await resend.emails.send(letter);
    await fetch(`${fakes.resend.url}/mail/${data?.id}/complain`, { method: "POST" });
    expect((await list()).map(({ status }) => status)).toEqual(["complained", "bounced"]);
  });

  it("are not for pages of other origins", async () => {
    const answer = await fetch(`${fakes.resend.url}/_control/reset`, {
      method: "POST",
      headers: { origin: "http://elsewhere.example" },
    });
    expect(answer.status).toBe(403);
  });
});

describe("the mailbox", () => {
  it("shows letters by recipient, says that it is a stand-in, and says when there is none", async () => {
    await resend.emails.send(letter);
    await resend.emails.send({ ...letter, to: "ines@example.com", subject: "Your <batch>" });
    const page = await pageOf("/?search=ines");
    expect(page).toContain("Local stand-in");
    expect(page).toContain("Your &lt;batch&gt;");
    expect(page).not.toContain("Your payout");
    expect(await pageOf("/?search=nobody")).toContain("No letter to");
  });

  it("shows the letter in a frame without scripts whose links leave it", async () => {
    const { data } = await resend.emails.send({ ...letter, html: `${letter.html}<script>alert(1)</script>` });
    const page = await pageOf(`/mail/${data?.id}`);
    expect(page).toMatch(
      /<iframe title="[^"]+" sandbox="allow-top-navigation-by-user-activation allow-popups allow-popups-to-escape-sandbox"/,
    );
    expect(page).toContain("&lt;base target=&quot;_top&quot;&gt;");
    expect(page).not.toContain("<script>");
    expect(page).toContain('<a href="https://a.example/x?y=1">');
  });

  it("waits for a letter that is still to come", async () => {
    const waiting = list("?to=late@example.com&waitMs=5000");
    await resend.emails.send({ ...letter, to: "late@example.com" });
    expect(await waiting).toHaveLength(1);
  });

  it("keeps its letters over a restart", async () => {
    await resend.emails.send(letter, { idempotencyKey: "kept" });
    fakes = await fakes.restart();
    ({ resend } = clientsOf(fakes));
    await resend.emails.send(letter, { idempotencyKey: "kept" });
    expect(await list()).toHaveLength(1);
  });
});

it("tells a webhook what became of a letter, signed by Standard Webhooks", async () => {
  const secret = "whsec_MfKQ9r8GKYqrTwjUPD8ILPZIo2LaLaSw";
  const seen: unknown[] = [];
  const server = createServer(async (request, response) => {
    const chunks: Buffer[] = [];
    for await (const chunk of request as AsyncIterable<Buffer>) chunks.push(chunk);
    const headers = Object.fromEntries(
      Object.entries(request.headers).map(([name, value]) => [name, String(value)]),
    );
    seen.push(new Webhook(secret).verify(Buffer.concat(chunks).toString(), headers));
    response.end();
  });
  await new Promise<void>((resolve) => server.listen(0, "127.0.0.1", resolve));
  const own = await startTestFakes({
    resend: {
      webhookUrl: `http://127.0.0.1:${(server.address() as AddressInfo).port}`,
      webhookSecret: secret,
    },
  });
  await clientsOf(own).resend.emails.send(letter);
  await eventually(() => seen.length === 2);
  expect(seen.map((event) => (event as { type: string }).type).sort()).toEqual([
    "email.delivered",
    "email.sent",
  ]);
  server.close();
  await own.remove();
});

it("stands in for the service's own host inside the process", async () => {
  const service = createResend({ folder: null });
  const server = interceptHosts({ "https://api.resend.com": service.core });
  server.listen({ onUnhandledRequest: "bypass" });
  const { error } = await createResendClient({
    apiKey: RESEND_KEY,
    baseUrl: "https://api.resend.com",
  }).emails.send(letter);
  server.close();
  expect(error).toBeNull();
  expect(service.mails()).toHaveLength(1);
  service.close();
});
