import { expect, it } from "vitest";
import { signWebhook } from "@/fakes/stripe/webhooks";
import type { Db } from "@/db/client";
import { jobs } from "@/db/schema";
import { backOffMs } from "@/lib/jobs/queue";
import { post } from "@/lib/market/mail";
import { receiveStripeEvent } from "@/lib/market/money/stripeEvents";
import { freshDb } from "@/tests/support/db";
import { HOUR_MS, START_MS } from "@/tests/support/market";

/** The time over which the queue's one job is tried before it is given up. */
function patienceMs(db: Db): number {
  const [job] = db.select().from(jobs).all();
  if (!job) throw new Error("there is a job");
  return Array.from({ length: job.attemptsMax - 1 }, (_, index) => backOffMs(job.id, index + 1)).reduce(
    (sum, wait) => sum + wait,
    0,
  );
}

it("an event is tried for more than a day: Stripe does not send again what was answered", () => {
  process.env.STRIPE_WEBHOOK_SECRET = "whsec_outage";
  const db = freshDb();
  const event = { id: "evt_1", object: "event", type: "payout.failed", data: { object: { id: "po_1" } } };
  const body = JSON.stringify(event);
  const signature = signWebhook(body, ["whsec_outage"], START_MS / 1000);
  receiveStripeEvent({ body, signature, nowMs: START_MS });
  expect(patienceMs(db)).toBeGreaterThan(24 * HOUR_MS);
});

it("a letter is tried for hours, and not beyond the day for which its key keeps it single", () => {
  const db = freshDb();
  post(db, { to: "a@skerrow.example", subject: "Hello", lines: ["Hello."], tag: "test" }, START_MS);
  expect(patienceMs(db)).toBeGreaterThan(3 * HOUR_MS);
  expect(patienceMs(db)).toBeLessThan(24 * HOUR_MS);
});
