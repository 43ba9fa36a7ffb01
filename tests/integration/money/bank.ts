import { createStripe, type StripeService } from "@/fakes/stripe/service";
import { serve, type Served } from "@/fakes/shared/transport";
import { POST } from "@/app/api/stripe/webhook/route";
import { inTransaction, type Db } from "@/db/client";
import { insertPosting } from "@/db/queries/ledger";
import { findUser } from "@/db/queries/people";
import { jobs, stripeEvents, topUps, users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { payoutRunJob } from "@/lib/jobs/handlers/payoutRun";
import { reconcileJob } from "@/lib/jobs/handlers/reconcile";
import { refundRunJob } from "@/lib/jobs/handlers/refundRun";
import { stripeEventJob } from "@/lib/jobs/handlers/stripeEvent";
import { failJob, finishJob, takeJob, type JobRow } from "@/lib/jobs/queue";
import { fundPosting, releasePosting } from "@/lib/ledger/postings";
import type { JobContext } from "@/lib/jobs/handlers";
import { startOnboarding } from "@/lib/market/money/onboarding";
import { requestPayout } from "@/lib/market/money/payouts";
import { startTopUp } from "@/lib/market/money/topUp";
import { person, team } from "@/tests/support/market";
import { freshDb } from "@/tests/support/db";

const WEBHOOK_URL = "http://127.0.0.1/api/stripe/webhook";
export const WEBHOOK_SECRET = "whsec_money_tests";

type Job = (payload: never, context: JobContext) => Promise<void>;
const JOBS: Record<string, Job> = {
  "stripe.event": stripeEventJob,
  "payout.run": payoutRunJob,
  "refund.run": refundRunJob,
  "ledger.reconcile": reconcileJob,
};

/** The stand-in of Stripe on a free port, the product's webhook behind it, and a fresh database for each test. */
export class Bank {
  db: Db = freshDb();
  private constructor(
    readonly service: StripeService,
    readonly served: Served,
  ) {}

  static async open(): Promise<Bank> {
    const service = createStripe({
      folder: null,
      webhookUrl: WEBHOOK_URL,
      webhookSecret: WEBHOOK_SECRET,
      deliver: async (url, headers, body) =>
        (await POST(new Request(url, { method: "POST", headers, body }))).status,
    });
    const served = await serve(service.core);
    service.setBaseUrl(served.url);
    process.env.STRIPE_API_BASE = served.url;
    process.env.STRIPE_WEBHOOK_SECRET = WEBHOOK_SECRET;
    process.env.LOG_LEVEL = "silent";
    return new Bank(service, served);
  }

  async reset(): Promise<void> {
    await this.control("reset");
    await this.control("settings", { settleMs: 0, payoutStepMs: 60_000, disputeFeeCents: 1500 });
    await this.control("webhooks", { paused: true, shuffle: false, duplicate: 0, drop: 0 });
    this.db = freshDb();
  }

  async close(): Promise<void> {
    await this.served.close();
    this.service.close();
  }

  async control(verb: string, input: Record<string, unknown> = {}): Promise<Record<string, unknown>> {
    const headers = { "content-type": "application/json" };
    const address = `${this.served.url}/_control/${verb}`;
    const answer = await fetch(address, { method: "POST", headers, body: JSON.stringify(input) });
    const body = (await answer.json()) as Record<string, unknown>;
    if (!answer.ok) throw new Error(`${verb}: ${answer.status} ${JSON.stringify(body)}`);
    return body;
  }

  /** Lets Stripe do all it has under way, delivers every event, and does every job that is due `aheadMs` from now. */
  async quiet(aheadMs = 0): Promise<JobRow[]> {
    const failed: JobRow[] = [];
    for (let round = 0; round < 6; round++) {
      await this.service.settle();
      failed.push(...(await this.work(aheadMs)));
    }
    return failed;
  }

  /** Does every money job that is due; mail is taken off the queue unsent. Returns those that failed. */
  async work(aheadMs = 0): Promise<JobRow[]> {
    const failed: JobRow[] = [];
    for (;;) {
      const nowMs = Date.now() + aheadMs;
      const job = takeJob(this.db, "test", nowMs);
      if (!job) return failed;
      try {
        await JOBS[job.kind]?.(job.payload as never, {
          jobId: job.id,
          nowMs: () => nowMs,
          progress: () => undefined,
        });
        finishJob(this.db, job, nowMs);
      } catch (error) {
        failJob(this.db, job, error, nowMs);
        failed.push({ ...job, lastError: String(error) });
      }
    }
  }

  /** A requester with a team and nothing in its wallet. */
  payer(): { owner: Actor; teamId: string } {
    const owner = person(this.db, "requester");
    return { owner, teamId: team(this.db, owner) };
  }

  /** Begins a card payment and gives its Checkout Session's id. */
  async checkout(owner: Actor, teamId: string, amountCents: number): Promise<string> {
    const input = { actor: owner, nowMs: Date.now(), teamId, amountCents, returnPath: "/wallet" };
    const { url } = await startTopUp(input);
    return new URL(url).pathname.split("/").pop() ?? "";
  }

  /** Pays a session with a card; throws with the answer when it is declined. */
  pay(sessionId: string, card = "4242424242424242"): Promise<Record<string, unknown>> {
    return this.control("pay-session", { id: sessionId, card });
  }

  /** A team whose wallet holds a card payment that arrived by webhook. */
  async wealthy(amountCents: number, card?: string): Promise<{ owner: Actor; teamId: string }> {
    const { owner, teamId } = this.payer();
    await this.pay(await this.checkout(owner, teamId, amountCents), card);
    await this.quiet();
    return { owner, teamId };
  }

  /** An annotator with a bank account and pay that came out of a team's escrow. */
  async earner(teamId: string, payCents: number, bank = "000123456789"): Promise<Actor> {
    const annotator = person(this.db, "annotator");
    await startOnboarding({ actor: annotator, nowMs: Date.now() });
    await this.control("complete-onboarding", { account: this.accountOf(annotator), bank });
    await this.quiet();
    this.earn(annotator, teamId, payCents);
    return annotator;
  }

  /** Pay of a batch that is not kept as a row: only its money matters here. */
  earn(annotator: Actor, teamId: string, payCents: number, batchId = `bat_of_${annotator.id}`): void {
    inTransaction(this.db, (tx) => {
      const cause = { source: "batch", sourceId: batchId, memo: "A test", nowMs: Date.now() };
      insertPosting(tx, { ...cause, kind: "fund", posting: fundPosting(teamId, batchId, payCents) });
      const posting = releasePosting({ batchId, annotatorId: annotator.id, payCents, feeCents: 0 });
      insertPosting(tx, { ...cause, kind: "release", posting });
    });
  }

  accountOf(annotator: Actor): string {
    return findUser(this.db, annotator.id)?.stripeAccountId ?? "";
  }

  askPayout(annotator: Actor, nowMs = Date.now()): string {
    return requestPayout({ actor: annotator, nowMs }).payoutId;
  }

  async balanceCents(): Promise<number> {
    return Number((await this.control("balance")).platform);
  }

  /** Requests of one kind that reached the stand-in, with their keys. */
  async requests(method: string, path: string): Promise<{ key: string | null; status: number }[]> {
    const { requests } = await this.control("requests");
    return (requests as { method: string; path: string; key: string | null; status: number }[]).filter(
      (request) => request.method === method && request.path === path,
    );
  }

  topUpRows = () => this.db.select().from(topUps).all();
  eventRows = () => this.db.select().from(stripeEvents).all();
  userRow = (id: string) =>
    this.db
      .select()
      .from(users)
      .all()
      .find((row) => row.id === id);
  jobRows = () => this.db.select().from(jobs).all();
}
