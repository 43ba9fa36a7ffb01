import { createHash } from "node:crypto";
import type { Actor } from "@/lib/auth/actor";
import type { DeskDocument } from "@/lib/contracts/desk";
import { Acknowledged, audit, sha256 } from "./auditor";
import { Bank, SECRET_KEY, WEBHOOK_SECRET, type Faults } from "./bank";
import { draw, seeThings, type Annotator, type Held, type Kind, type Picture } from "./crowd";
import type { Input, Operations, Value } from "./operations";
import { Died, Product, Violation, type Reply } from "./product";
import { Random, seedIds } from "./random";

const START_MS = Date.UTC(2026, 2, 2, 9);
const MINUTE_MS = 60_000;
const HOUR_MS = 60 * MINUTE_MS;
const DAY_MS = 24 * HOUR_MS;

const CROWD: readonly Kind[] = [
  ...Array<Kind>(5).fill("careful"),
  ...Array<Kind>(2).fill("sloppy"),
  ...Array<Kind>(2).fill("disputer"),
  "spammer",
  "copier",
  "slow",
];
const OPEN_BATCHES_MAX = 6;
const AUDIT_EVERY = 1000;
/** Steps for which a person does not ask again a batch that had nothing. */
const BORED_STEPS = 80;
/** A call to the outside may last long enough for others to act, and for others during those. */
const DEPTH_MAX = 2;

const HABITS = [
  "work",
  "job",
  "letter",
  "requester",
  "pay",
  "admin",
  "money",
  "trouble",
  "sweep",
  "regular",
  "nightly",
] as const;
type Habit = (typeof HABITS)[number];

function chooseHabits(dice: Random): Record<Habit, number> {
  const share = () => dice.pick([0.3, 1, 1, 3]) ?? 1;
  return Object.fromEntries(HABITS.map((habit) => [habit, share()])) as Record<Habit, number>;
}

type Requester = { actor: Actor; teamId: string };
type Batch = {
  batchId: string;
  requester: Requester;
  status: "draft" | "open" | "paused" | "closed";
  imageIds: string[];
};

export type Report = {
  seed: number;
  steps: number;
  kills: number;
  days: number;
  submissions: number;
  payouts: number;
  payoutCents: number;
  topUpCents: number;
  calls: number;
  faults: Faults & { duplicated: number; vanished: number; interleaved: number };
  /** Of operations, by name: answered, refused, unanswered because a hosted service was not there. */
  operations: Record<string, [number, number, number]>;
  violations: string[];
  /** SHA-256 of all that was asked and answered: the same for every replay. */
  history: string;
  /** The step at which a violation was seen. */
  at: number;
  seconds: number;
};

export type Plan = { seed: number; steps: number; kills: number; program: string; file: string };

/** One history from one seed: people, money, time, faults and deaths. */
export class Episode {
  private readonly dice: Random;
  private readonly bank: Bank;
  private readonly product: Product;
  private readonly acknowledged = new Acknowledged();
  private readonly operations: Report["operations"] = {};
  private annotators: Annotator[] = [];
  private requesters: Requester[] = [];
  private admins: Actor[] = [];
  private batches: Batch[] = [];
  private readonly pictures = new Map<string, Picture>();
  /** Handed in, by picture: what a copier can look at. */
  private readonly seen = new Map<string, DeskDocument[]>();
  /** Sent and not answered: the annotator's browser sends it again. */
  private unsure: { annotator: Annotator; held: Held; document: DeskDocument }[] = [];
  /** How much of each there is in this history (swarm testing: A. Groce et al., 2012). */
  private readonly habits: Record<Habit, number>;
  private readonly history = createHash("sha256");
  private depth = 0;
  private due = 0;
  private step = 0;
  private interleaved = 0;
  private broken: unknown;

  constructor(private readonly plan: Plan) {
    this.dice = new Random([plan.seed, 0x5eed]);
    this.habits = chooseHabits(this.dice);
    seedIds(new Random([plan.seed, 0x1d5]));
    this.bank = new Bank(new Random([plan.seed, 0xba4c]), START_MS);
    this.product = new Product({
      program: plan.program,
      file: plan.file,
      secretKey: SECRET_KEY,
      webhookSecret: WEBHOOK_SECRET,
      dice: new Random([plan.seed, 0xd1ce]),
      nowMs: this.bank.nowMs,
      answer: async (call) => {
        if (this.isMeanwhile()) await this.meanwhile();
        const answer = await this.bank.answer(call);
        if (this.isMeanwhile()) await this.meanwhile();
        return answer;
      },
    });
  }

  async run(): Promise<Report> {
    const startedMs = performance.now();
    const violations: string[] = [];
    try {
      this.product.start();
      await this.settleIn();
      const deaths = this.chooseDeaths();
      for (this.step = 1; this.step <= this.plan.steps; this.step += 1) {
        if (deaths.has(this.step)) await this.product.doom(this.dice.int(1, 16));
        await this.turn();
        if (!this.product.isAlive) await this.recover();
        if (this.broken !== undefined) throw this.broken;
        if (this.step % AUDIT_EVERY === 0) this.check();
      }
      // A process that came by too few points to die is stopped as an operator would.
      await this.product.stop();
      this.product.start();
      await this.windDown();
      this.check(true);
    } catch (error) {
      if (!(error instanceof Violation)) throw error;
      violations.push(error.message);
    } finally {
      await this.product.stop();
      this.bank.close();
    }
    const { world } = this.bank;
    const sum = (rows: Iterable<{ amount: number }>) =>
      [...rows].reduce((total, { amount }) => total + amount, 0);
    return {
      seed: this.plan.seed,
      steps: Math.min(this.step, this.plan.steps),
      kills: this.product.deaths,
      days: (this.bank.nowMs() - START_MS) / DAY_MS,
      submissions: this.acknowledged.submissions.size,
      payouts: world.transfers.size,
      payoutCents: sum(world.transfers.values()),
      topUpCents: sum(
        [...world.charges.values()].filter(
          (row) => row.payment_intent !== null && row.status === "succeeded",
        ),
      ),
      calls: this.product.calls,
      faults: {
        ...this.bank.faults,
        duplicated: this.bank.duplicated,
        vanished: this.bank.vanished,
        interleaved: this.interleaved,
      },
      operations: this.operations,
      violations,
      history: this.history.digest("hex").slice(0, 16),
      at: this.step,
      seconds: (performance.now() - startedMs) / 1000,
    };
  }

  /** The steps at which a death is armed. */
  private chooseDeaths(): Set<number> {
    const chosen = new Set<number>();
    while (chosen.size < Math.min(this.plan.kills, this.plan.steps))
      chosen.add(this.dice.int(1, this.plan.steps));
    return chosen;
  }

  private async settleIn(): Promise<void> {
    for (const name of ["skua", "tern"]) {
      const actor = await this.product.get("person", { role: "requester", name });
      this.requesters.push({ actor, teamId: await this.product.get("team", { actor }) });
    }
    for (const name of ["warden", "keeper", "pilot", "reeve", "bailiff"])
      this.admins.push(await this.product.get("person", { role: "admin", name }));
    for (const [index, kind] of CROWD.entries()) {
      const actor = await this.product.get("person", { role: "annotator", name: `${kind}${index}` });
      this.annotators.push({ actor, kind, held: [], done: [], bored: new Map(), isOnboarded: false });
    }
    for (const { actor, teamId } of this.requesters)
      await this.ask("topUp", { actor, teamId, amountCents: 60_000 });
  }

  /** After a death: the process comes back, everything is looked at, and everybody opens their desk again. */
  private async recover(): Promise<void> {
    await this.product.restart();
    if (this.broken !== undefined) throw this.broken;
    this.check();
    for (const annotator of this.annotators) {
      const held = await this.product.get("held", { actor: annotator.actor });
      annotator.held = held.map((row) => ({
        ...row,
        version: this.acknowledged.drafts.get(row.claimId) ?? 0,
        sinceMs: this.bank.nowMs(),
      }));
    }
  }

  private check(isOver = false): void {
    const wrong = audit(this.plan.file, this.acknowledged, this.bank.world, { isOver });
    if (wrong.length > 0) throw new Violation(wrong.slice(0, 8).join("\n  "));
  }

  private isMeanwhile(): boolean {
    return !this.bank.isCalm && this.depth < DEPTH_MAX && this.broken === undefined && this.dice.chance(0.08);
  }

  /** Others act while one waits for an answer. */
  private async meanwhile(): Promise<void> {
    this.depth += 1;
    this.interleaved += 1;
    try {
      if (this.product.isAlive) await this.turn();
    } catch (error) {
      this.broken ??= error;
    } finally {
      this.depth -= 1;
    }
  }

  /** Asks and keeps count; undefined when the process died of it. */
  private async ask<K extends keyof Operations>(
    operation: K,
    input: Input<K>,
  ): Promise<Reply<Value<K>> | undefined> {
    const counts = (this.operations[operation] ??= [0, 0, 0]);
    try {
      const reply = await this.product.ask(operation, input);
      const said = reply.ok ? JSON.stringify(reply.value) : (reply.message.split("\n")[0] ?? "");
      this.history.update(`${this.bank.nowMs()} ${operation} ${said}\n`);
      counts[reply.ok ? 0 : reply.why === "refused" ? 1 : 2] += 1;
      return reply;
    } catch (error) {
      if (!(error instanceof Died)) throw error;
      this.history.update(`${operation} died\n`);
      return undefined;
    }
  }

  private async turn(): Promise<void> {
    const { dice } = this;
    await this.bank.advance(this.howLong());
    const { habits } = this;
    const kind = dice.weighted({
      work: 10 * habits.work,
      job: (0.5 + Math.min(14, this.due)) * habits.job,
      letter: Math.min(8, this.bank.post.length) * habits.letter,
      requester: 2 * habits.requester,
      pay: 0.5 * habits.pay,
      admin: 0.4 * habits.admin,
      money: 0.8 * habits.money,
      trouble: 0.15 * habits.trouble,
      sweep: 0.1 * habits.sweep,
      regular: 0.06 * habits.regular,
      nightly: 0.02 * habits.nightly,
    });
    switch (kind) {
      case "work":
        return this.work();
      case "job":
        return this.doJob();
      case "letter":
        return this.deliver();
      case "requester":
        return this.request();
      case "pay":
        return this.bank.paySomeSession();
      case "admin": {
        const actor = dice.pick(this.admins);
        if (actor) await this.ask("decide", { actor, nth: dice.int(0, 50), share: dice.next() });
        return;
      }
      case "money":
        return this.cashIn();
      case "trouble":
        return this.bank.trouble();
      default:
        await this.ask(kind, {});
        this.due += 1;
    }
  }

  private howLong(): number {
    const { dice } = this;
    if (dice.chance(0.001)) return dice.int(1, 3) * DAY_MS;
    if (dice.chance(0.01)) return dice.int(10, 90) * MINUTE_MS;
    return dice.int(1, 25) * 1000;
  }

  private async doJob(): Promise<void> {
    const reply = await this.ask("job", { workerId: `worker-${this.dice.int(1, 2)}` });
    if (!reply?.ok) return;
    this.due = reply.value.due;
  }

  private async deliver(): Promise<void> {
    const letter = this.bank.takeLetter();
    if (!letter) return;
    const reply = await this.ask("webhook", letter);
    if (!reply) return this.bank.returnLetter(letter);
    if (!reply.ok) throw new Violation(`a signed event was refused: ${reply.message}`);
    const { id } = JSON.parse(letter.body) as { id: string };
    this.acknowledged.events.add(id);
    this.due += 1;
  }

  private async request(): Promise<void> {
    const { dice } = this;
    const requester = dice.pick(this.requesters);
    if (!requester) return;
    const { actor, teamId } = requester;
    const own = this.batches.filter((batch) => batch.requester === requester);
    const batch = dice.pick(own.filter(({ status }) => status !== "closed"));
    const open = this.batches.filter(({ status }) => status === "open" || status === "paused").length;
    const kind = dice.weighted({
      topUp: 3,
      draft: open < OPEN_BATCHES_MAX ? 12 : 0,
      publish: own.some(({ status }) => status === "draft") ? 12 : 0,
      pause: batch?.status === "open" ? 1 : batch?.status === "paused" ? 8 : 0,
      close: batch && batch.status !== "draft" ? 3 : 0,
      target: batch ? 0.5 : 0,
      contestImage: 4,
      refund: 1,
    });
    switch (kind) {
      case "topUp":
        await this.ask("topUp", { actor, teamId, amountCents: dice.int(20, 900) * 100 });
        return;
      case "draft": {
        const kMin = dice.int(2, 3);
        const pay = {
          baseCents: dice.int(1, 6),
          boxCents: dice.int(1, 8),
          polygonCents: dice.int(2, 12),
          capCents: dice.int(20, 80),
        };
        const plan = {
          kMin,
          kMax: kMin + dice.int(0, 2),
          agreementTarget: 0.5 + 0.4 * dice.next(),
          imageCount: dice.int(2, 8),
          pay,
        };
        const reply = await this.ask("draft", { actor, teamId, ...plan });
        if (!reply?.ok) return;
        const { batchId, imageIds, classIds } = reply.value;
        this.batches.push({ batchId, requester, status: "draft", imageIds });
        for (const imageId of imageIds)
          this.pictures.set(imageId, { imageId, batchId, classIds, things: seeThings(dice) });
        return;
      }
      case "publish": {
        const draft = own.find(({ status }) => status === "draft");
        if (!draft) return;
        const reply = await this.ask("publish", { actor, batchId: draft.batchId });
        if (reply?.ok || reply?.message.includes("already")) draft.status = "open";
        return;
      }
      case "pause": {
        if (!batch) return;
        const paused = batch.status === "open";
        const reply = await this.ask("pause", { actor, batchId: batch.batchId, paused });
        if (reply?.ok) batch.status = paused ? "paused" : "open";
        else if (reply) batch.status = batch.status === "open" ? "paused" : "open"; // it went through before a death
        return;
      }
      case "close": {
        if (!batch) return;
        const reply = await this.ask("close", { actor, batchId: batch.batchId });
        if (reply?.ok || reply?.message.includes("is closed")) batch.status = "closed";
        return;
      }
      case "target":
        if (batch)
          await this.ask("target", { actor, batchId: batch.batchId, target: 0.5 + 0.4 * dice.next() });
        return;
      case "contestImage": {
        const imageIds = dice.pick(own)?.imageIds ?? [];
        if (dice.chance(0.3)) {
          const found = await this.ask("decided", { subjects: imageIds });
          const disputeId = found?.ok ? dice.pick(found.value) : undefined;
          if (disputeId) await this.ask("appeal", { actor, disputeId });
          return;
        }
        const imageId = dice.pick(imageIds);
        if (imageId) await this.ask("contestImage", { actor, imageId });
        return;
      }
      case "refund": {
        const amountCents = dice.int(1, 4000);
        const reply = await this.ask("refund", { actor, teamId, amountCents });
        if (!reply?.ok) return;
        const { refunds } = this.acknowledged;
        refunds.set(teamId, (refunds.get(teamId) ?? 0) + amountCents);
        this.due += 1;
      }
    }
  }

  private async cashIn(): Promise<void> {
    const { dice } = this;
    const annotator = dice.pick(this.annotators);
    if (!annotator) return;
    const { actor } = annotator;
    if (!annotator.isOnboarded) {
      const reply = await this.ask("onboard", { actor });
      if (!reply?.ok) return;
      const account = await this.ask("account", { actor });
      if (!account?.ok || account.value === null) return;
      this.bank.completeOnboarding(account.value);
      annotator.isOnboarded = true;
      return;
    }
    if (dice.chance(0.1)) {
      const rhythm = dice.pick(["never", "weekly", "monthly"] as const) ?? "never";
      await this.ask("schedule", {
        actor,
        input: { rhythm, weekday: dice.int(1, 7), leastCents: dice.int(100, 300) },
      });
      return;
    }
    const isAll = dice.chance(0.6);
    const reply = await this.ask("payout", { actor, ...(!isAll && { amountCents: dice.int(100, 400) }) });
    if (!reply?.ok) return;
    this.acknowledged.payouts.set(reply.value.payoutId, reply.value.amountCents);
    this.due += 1;
  }

  private async work(): Promise<void> {
    const { dice } = this;
    const again = this.unsure.pop();
    if (again) return this.handIn(again.annotator, again.held, again.document);
    const annotator = dice.pick(this.annotators);
    if (!annotator) return;
    const { actor, kind } = annotator;
    if (annotator.done.length > 0 && dice.chance(kind === "disputer" ? 0.3 : 0.04))
      return this.contest(annotator);
    const held = dice.pick(annotator.held);
    if (!held || (annotator.held.length < 2 && dice.chance(0.15))) {
      const { bored } = annotator;
      const batch = dice.pick(
        this.batches.filter(
          ({ status, batchId }) => status === "open" && (bored.get(batchId) ?? 0) < this.step - BORED_STEPS,
        ),
      );
      if (!batch) return;
      const reply = await this.ask("claim", { actor, batchId: batch.batchId });
      if (reply && !reply.ok) bored.set(batch.batchId, this.step);
      if (!reply?.ok) return;
      const { claimId, imageId } = reply.value;
      if (!annotator.held.some((row) => row.claimId === claimId))
        annotator.held.push({
          claimId,
          batchId: batch.batchId,
          imageId,
          version: 0,
          sinceMs: this.bank.nowMs(),
        });
      return;
    }
    const act = dice.weighted(
      kind === "slow"
        ? { heartbeat: 3, save: 3, release: 1, submit: 3 }
        : { heartbeat: 0.5, save: 1, release: 0.4, submit: 8 },
    );
    const { claimId } = held;
    if (act === "heartbeat") {
      const reply = await this.ask("heartbeat", { actor, claimId });
      if (reply && !reply.ok) drop(annotator, held);
    } else if (act === "release") {
      const reply = await this.ask("release", { actor, claimId });
      if (reply) drop(annotator, held);
    } else if (act === "save") {
      const reply = await this.ask("save", {
        actor,
        claimId,
        document: this.drawing(annotator, held),
        version: held.version,
      });
      if (reply?.ok) {
        held.version = reply.value.version;
        this.acknowledged.drafts.set(claimId, held.version);
      } else if (reply) drop(annotator, held);
    } else await this.handIn(annotator, held, this.drawing(annotator, held));
  }

  private drawing(annotator: Annotator, { imageId }: Held): DeskDocument {
    const picture = this.pictures.get(imageId);
    // A draft whose making was not answered may be published by a later death's doubt: nothing is known of it.
    return picture
      ? draw(annotator.kind, picture, this.seen.get(imageId) ?? [], this.dice)
      : { instances: [], dismissedProposalIds: [] };
  }

  private async handIn(annotator: Annotator, held: Held, document: DeskDocument): Promise<void> {
    const { actor } = annotator;
    const { claimId } = held;
    const activeSeconds = Math.max(1, (this.bank.nowMs() - held.sinceMs) / 1000);
    const input = { actor, claimId, document, activeSeconds };
    const reply = await this.ask("submit", input);
    if (!reply) {
      this.unsure.push({ annotator, held, document });
      return;
    }
    drop(annotator, held);
    if (!reply.ok) {
      if (reply.message.includes("already")) throw new Violation("the same work was refused the second time");
      return;
    }
    const { submissionId } = reply.value;
    this.acknowledged.submissions.set(submissionId, sha256(JSON.stringify(document)));
    annotator.done.push(submissionId);
    this.seen.set(held.imageId, [...(this.seen.get(held.imageId) ?? []), document]);
    this.due += 1;
    if (!this.dice.chance(0.04)) return;
    const twice = await this.ask("submit", input);
    if (twice && (!twice.ok || twice.value.submissionId !== submissionId))
      throw new Violation(`work that was sent twice became two: ${submissionId}`);
  }

  private async contest(annotator: Annotator): Promise<void> {
    const { dice } = this;
    if (dice.chance(0.3)) {
      const found = await this.ask("decided", { subjects: annotator.done.slice(-8) });
      const disputeId = found?.ok ? dice.pick(found.value) : undefined;
      if (disputeId) await this.ask("appeal", { actor: annotator.actor, disputeId });
      return;
    }
    const submissionId = dice.pick(annotator.done.slice(-6));
    if (!submissionId) return;
    const reply = await this.ask("contest", { actor: annotator.actor, submissionId });
    if (reply?.ok && dice.chance(0.15))
      await this.ask("withdraw", { actor: annotator.actor, disputeId: reply.value });
  }

  /** Faults end, everything that is under way arrives, cases are decided, batches closed and earnings paid out. */
  private async windDown(): Promise<void> {
    this.bank.isCalm = true;
    await this.quiet();
    for (const { annotator, held, document } of this.unsure.splice(0))
      await this.handIn(annotator, held, document);
    const [first] = this.requesters;
    if (first) {
      // What was charged back and what cards cost is the platform's; its balance has to cover what it owes.
      const { url } = await this.product.get("topUp", { ...first, amountCents: 1_000_000 });
      this.bank.paySession(new URL(url).pathname.split("/").pop() ?? "", "4000000000000077");
    }
    await this.bank.advance(HOUR_MS); // leases run out
    await this.ask("sweep", {});
    await this.quiet();
    const { left } = await this.product.get("decideAll", { share: this.dice.next() });
    if (left > 0) throw new Violation(`${left} disputes cannot be decided`);
    await this.quiet();
    for (const batch of this.batches.filter(({ status }) => status !== "draft")) {
      const reply = await this.ask("close", { actor: batch.requester.actor, batchId: batch.batchId });
      if (reply && !reply.ok && !reply.message.includes("is closed") && !reply.message.includes("is draft"))
        throw new Violation(`batch ${batch.batchId} cannot be closed: ${reply.message}`);
    }
    for (const { actor, isOnboarded } of this.annotators) {
      if (!isOnboarded) continue;
      await this.ask("schedule", { actor, input: { rhythm: "never", weekday: 1, leastCents: 100 } });
      const reply = await this.ask("payout", { actor });
      if (reply?.ok) this.acknowledged.payouts.set(reply.value.payoutId, reply.value.amountCents);
    }
    await this.quiet();
    await this.bank.advance(3 * DAY_MS);
    await this.quiet();
    const found = await this.product.get("reconcile", {});
    await this.quiet();
    const { ledgerCents, stripeCents, ledgerPendingCents, stripePendingCents, waiting, suspended } = found;
    if (ledgerCents !== stripeCents || ledgerPendingCents !== stripePendingCents)
      throw new Violation(
        `Stripe keeps ${stripeCents} (${stripePendingCents} pending), the ledger says ${ledgerCents} (${ledgerPendingCents})`,
      );
    if (waiting + suspended > 0)
      throw new Violation(`${waiting} transactions wait and ${suspended} are in suspense`);
  }

  /** Delivers every letter and does every job, letting as much time pass as they ask for. */
  private async quiet(): Promise<void> {
    for (let round = 0; round < 4000; round += 1) {
      while (this.bank.post.length > 0) await this.deliver();
      const reply = await this.product.get("job", { workerId: "worker-1" });
      if (reply.kind !== null) continue;
      if (reply.nextMs !== null && reply.nextMs - this.bank.nowMs() < 40 * DAY_MS) {
        await this.bank.advance(Math.max(1, reply.nextMs - this.bank.nowMs()));
        continue;
      }
      const timers = [...this.bank.world.timers.values()].filter(
        ({ kind }) => kind !== "expire-session" && kind !== "lapse-dispute",
      );
      if (timers.length === 0 && this.bank.post.length === 0) return;
      await this.bank.advance(Math.max(1, Math.min(...timers.map(({ dueMs }) => dueMs)) - this.bank.nowMs()));
    }
    throw new Violation("work never ends: jobs or events are under way for ever");
  }
}

function drop(annotator: Annotator, held: Held): void {
  annotator.held = annotator.held.filter((row) => row.claimId !== held.claimId);
}
