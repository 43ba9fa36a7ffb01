import { createResend } from "@/fakes/resend/service";
import { callOf, only, type Answer } from "@/fakes/shared/transport";
import { failPayout, completeOnboarding } from "@/fakes/stripe/connect";
import { closeDispute, openDispute } from "@/fakes/stripe/disputes";
import { expireSession, paySession } from "@/fakes/stripe/payments";
import { createStripe } from "@/fakes/stripe/service";
import { signWebhook } from "@/fakes/stripe/webhooks";
import type { WireAnswer, WireCall } from "./protocol";
import type { Random } from "./random";

export const SECRET_KEY = "sk_test_simulation";
export const WEBHOOK_SECRET = "whsec_simulation";

const CARDS = {
  "4242424242424242": 50,
  "4000000000000077": 25,
  "4000000000000002": 6,
  "4000000000009995": 4,
  "4000000000000259": 5,
  "4000000000005126": 5,
  "4000000000007726": 5,
};
const BANKS = { "000123456789": 80, "000111111116": 12, "000111111113": 8 };

/** Events that may never arrive: what they tell of is found by the reconciliation as well. */
const LOSABLE = [
  "charge.succeeded",
  "checkout.session.completed",
  "refund.created",
  "refund.updated",
  "refund.failed",
];

/** An event on its way: the same letter may lie in the box twice. */
type Posted = { body: string };

export type Faults = Record<"lostBefore" | "lostAfter" | "busy" | "tooMany" | "broken", number>;

/**
 * The hosted services of a simulation: the stand-ins of Stripe and Resend on the virtual clock, behind a network
 * that loses questions and answers, and a post that brings events late, twice and in any order.
 */
export class Bank {
  readonly post: Posted[] = [];
  readonly faults: Faults = { lostBefore: 0, lostAfter: 0, busy: 0, tooMany: 0, broken: 0 };
  readonly service = createStripe({ folder: null, secretKey: SECRET_KEY, isManual: true });
  readonly mail = createResend({ folder: null, apiKey: "re_localdemo" });
  isCalm = false;
  /** How bad the network is: seeds differ, for what calm weather hides. */
  private readonly weather: number;
  duplicated = 0;
  vanished = 0;
  /** Letters that were taken although their key had been used. */
  private letters = 0;

  constructor(
    private readonly dice: Random,
    startMs: number,
  ) {
    this.weather = dice.pick([0.3, 1, 1, 3]) ?? 1;
    const { clock, world } = this.service;
    clock.freeze(startMs);
    this.mail.clock.freeze(startMs);
    world.settings.settleMs = dice.pick([0, 3_600_000, 2 * 86_400_000]) ?? 0;
    world.settings.payoutStepMs = dice.pick([1000, 600_000, 6 * 3_600_000]) ?? 1000;
    world.onEvent = (event) => {
      if (!this.isCalm && LOSABLE.includes(event.type) && dice.chance(0.1)) {
        this.vanished += 1;
        return;
      }
      const body = JSON.stringify(world.render(event));
      this.post.push({ body });
      if (!this.isCalm && dice.chance(0.15)) {
        this.post.push({ body });
        this.duplicated += 1;
      }
    };
  }

  get world() {
    return this.service.world;
  }

  nowMs = (): number => this.service.clock.nowMs();

  async advance(byMs: number): Promise<void> {
    this.service.clock.advance(byMs);
    this.mail.clock.advance(byMs);
    const nowMs = this.nowMs();
    for (const timer of this.world.timers.values())
      if (timer.dueMs <= nowMs) {
        await this.service.tick();
        return;
      }
  }

  /** What the product asked, as the network brings it there and back; null when either way is lost. */
  async answer(call: WireCall): Promise<WireAnswer | null> {
    const dice = this.isCalm ? 1 : this.dice.next() / this.weather;
    if (dice < 0.03) return this.note("lostBefore", null);
    if (dice < 0.04 && call.method === "POST" && call.service === "stripe")
      return this.note(
        "busy",
        failure(409, { type: "invalid_request_error", code: "idempotency_key_in_use" }),
      );
    if (dice < 0.05) {
      if (call.service === "resend")
        return this.note("tooMany", {
          ...failure(429, {}),
          body: JSON.stringify({ name: "rate_limit_exceeded", message: "Slow down." }),
        });
      return this.note("tooMany", failure(429, { type: "invalid_request_error", code: "rate_limit" }));
    }
    if (dice < 0.06 && call.service === "stripe") {
      this.note("broken", null);
      await this.control("fault", { when: "inside", action: "status", status: 500 });
    }
    const answer = await this.perform(call);
    return dice >= 0.06 && dice < 0.1 ? this.note("lostAfter", null) : answer;
  }

  private note(fault: keyof Faults, answer: WireAnswer | null): WireAnswer | null {
    this.faults[fault] += 1;
    return answer;
  }

  private async perform({ service, method, target, headers, body }: WireCall): Promise<WireAnswer | null> {
    const core = service === "stripe" ? this.service.core : this.mail.core;
    return toWire(await core(callOf(method, target, headers, only(Buffer.from(body)))));
  }

  private async control(verb: string, input: Record<string, unknown>): Promise<void> {
    const bytes = Buffer.from(JSON.stringify(input));
    const headers = { "content-type": "application/json" };
    const answer = await this.service.core(callOf("POST", `/_control/${verb}`, headers, only(bytes)));
    if (answer.status !== 200) throw new Error(`the stand-in refused ${verb}: ${String(answer.body)}`);
  }

  /** Takes one letter out of the box, any of them, with a fresh signature. */
  takeLetter(): (Posted & { signature: string }) | undefined {
    if (this.post.length === 0) return undefined;
    const at = this.isCalm || this.dice.chance(0.6) ? 0 : this.dice.int(0, this.post.length - 1);
    const [letter] = this.post.splice(at, 1);
    if (!letter) return undefined;
    this.letters += 1;
    return {
      ...letter,
      signature: signWebhook(letter.body, [WEBHOOK_SECRET], this.service.clock.nowSeconds()),
    };
  }

  /** Nobody took the letter: it comes again. */
  returnLetter({ body }: Posted): void {
    this.post.push({ body });
  }

  /** Somebody with a card in the hand opens a session, or lets it be. */
  paySomeSession(): void {
    const session = this.dice.pick(this.world.sessions.all().filter(({ status }) => status === "open"));
    if (!session) return;
    if (this.dice.chance(0.06)) expireSession(this.world, session);
    else paySession(this.world, session, this.dice.weighted(CARDS), true);
    this.world.documents.commit();
  }

  paySession(id: string, card: string): void {
    const session = this.world.sessions.find(id);
    if (session) paySession(this.world, session, card, true);
    this.world.documents.commit();
  }

  /** An annotator fills in the onboarding; some banks will send the money back. */
  completeOnboarding(accountId: string, bank: string = this.dice.weighted(BANKS)): void {
    const account = this.world.accounts.find(accountId);
    if (account) completeOnboarding(this.world, account, bank);
    this.world.documents.commit();
  }

  /** What happens at card holders' banks without anybody asking. */
  trouble(): void {
    const { world, dice } = this;
    const kind = dice.weighted({ dispute: 2, close: 4, failPaid: 2 });
    if (kind === "dispute") {
      const charge = dice.pick(
        world.charges
          .all()
          .filter(
            (row) =>
              row.status === "succeeded" &&
              !row.disputed &&
              row.payment_intent !== null &&
              row.amount_refunded < row.amount,
          ),
      );
      if (charge && dice.chance(0.3)) openDispute(world, charge);
    } else if (kind === "close") {
      const dispute = dice.pick(
        world.disputes.all().filter(({ status }) => status === "needs_response" || status === "under_review"),
      );
      if (dispute) closeDispute(world, dispute, dice.chance(0.5) ? "won" : "lost");
    } else {
      const payout = dice.pick(world.payouts.all().filter(({ status }) => status === "paid"));
      if (payout && dice.chance(0.3))
        failPayout(world, payout, { code: "no_account", message: "The bank sent it back." });
    }
    world.documents.commit();
  }

  close(): void {
    this.service.close();
    this.mail.close();
  }
}

const failure = (status: number, error: Record<string, unknown>): WireAnswer => ({
  status,
  headers: { "content-type": "application/json" },
  body: JSON.stringify({ error: { ...error, message: "The simulation was told to fail." } }),
});

function toWire({ status, headers = {}, body, dropped }: Answer): WireAnswer | null {
  if (dropped) return null;
  return {
    status,
    headers,
    body:
      typeof body === "string" ? body : Buffer.from((body as Uint8Array | undefined) ?? []).toString("utf8"),
  };
}
