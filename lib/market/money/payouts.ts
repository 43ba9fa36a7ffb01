import { and, eq, inArray } from "drizzle-orm";
import Stripe from "stripe";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { balanceOf, findPosting, insertPosting, raiseAlert } from "@/db/queries/ledger";
import { findUser } from "@/db/queries/people";
import { payouts } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { newId } from "@/lib/ids";
import { enqueue } from "@/lib/jobs/queue";
import { CURRENCY, formatUsd } from "@/lib/ledger/amounts";
import { accountId } from "@/lib/ledger/posting";
import { payoutBackPosting, payoutSentPosting, payoutStartPosting } from "@/lib/ledger/postings";
import { audit } from "@/lib/market/audit";
import { post } from "@/lib/market/mail";
import { stripe } from "@/lib/services/stripeClient";
import { bookTransaction, bucketOf, transactionOf, type Transaction } from "./balanceTransactions";

export { refreshOnboarding, startOnboarding } from "./onboarding";

type PayoutRow = typeof payouts.$inferSelect;

/** The least that is paid out at once: below it the transfer would cost more than it brings. */
export const PAYOUT_MIN_CENTS = 100;

const ATTEMPTS_MAX = 320;

/** Wait before Stripe is asked again for money that it does not let us use yet. */
const NOT_AVAILABLE_WAIT_MS = 3_600_000;

type Request = {
  actor: Actor;
  nowMs: number;
  /** All that is payable when left out. */
  amountCents?: number;
};

/** Asks for money that is payable. The intent and the posting come first; the job does the rest. */
export function requestPayout({ actor, nowMs, amountCents: wanted }: Request): {
  payoutId: string;
  amountCents: number;
} {
  return inTransaction(getDb(), (tx) => {
    const user = findUser(tx, actor.id);
    if (!user?.stripeAccountId || !user.payoutsEnabled)
      throw new AppError("conflict", "Set up your payout account first.");
    const payableCents = balanceOf(tx, accountId("payable", actor.id));
    const amountCents = wanted ?? payableCents;
    if (!Number.isSafeInteger(amountCents) || amountCents < PAYOUT_MIN_CENTS)
      throw new AppError(
        wanted === undefined ? "conflict" : "invalid",
        `A payout starts at ${formatUsd(PAYOUT_MIN_CENTS)}.`,
      );
    if (amountCents > payableCents)
      throw new AppError("conflict", `There is ${formatUsd(payableCents)} to be paid out.`);
    const payoutId = beginPayout(tx, { annotatorId: actor.id, amountCents, scheduledForMs: null, nowMs });
    return { payoutId, amountCents };
  });
}

type Begin = { annotatorId: string; amountCents: number; scheduledForMs: number | null; nowMs: number };

/** Writes intent, posting and job of a payout whose amount was checked, in the caller's transaction. */
export function beginPayout(tx: Tx, { annotatorId, amountCents, scheduledForMs, nowMs }: Begin): string {
  const payoutId = newId("out");
  tx.insert(payouts)
    .values({ id: payoutId, annotatorId, amountCents, status: "queued", scheduledForMs, createdAtMs: nowMs })
    .run();
  insertPosting(tx, {
    source: "payout",
    sourceId: payoutId,
    kind: "start",
    posting: payoutStartPosting(annotatorId, amountCents),
    memo: "Payout",
    nowMs,
  });
  enqueuePayout(tx, payoutId, annotatorId, nowMs);
  audit(tx, {
    actorId: scheduledForMs === null ? annotatorId : null,
    action: scheduledForMs === null ? "payout.requested" : "payout.scheduled",
    subject: payoutId,
    detail: { amountCents },
    nowMs,
  });
  return payoutId;
}

function enqueuePayout(tx: Tx, payoutId: string, annotatorId: string, nowMs: number, attempt = 1): void {
  enqueue(tx, {
    kind: "payout.run",
    payload: { payoutId },
    subject: annotatorId,
    uniqueKey: `payout:${payoutId}:${attempt}`,
    nowMs,
    delayMs: attempt > 1 ? NOT_AVAILABLE_WAIT_MS : 0,
    priority: 6,
    // The attempts, at most five minutes apart, outlast the day for which Stripe replays a failure of its own.
    attemptsMax: ATTEMPTS_MAX,
  });
}

/**
 * The job of one payout: one transfer to the annotator's account, then a payout from there to the bank. It may
 * run again after a crash at any point: the key of each call carries the attempt, which rises only after a
 * definite refusal, and a transfer that was made but not noted is found by its group, however old its key is.
 */
export async function runPayout({ payoutId, nowMs }: { payoutId: string; nowMs: number }): Promise<void> {
  const db = getDb();
  const payout = db.select().from(payouts).where(eq(payouts.id, payoutId)).get();
  if (!payout || payout.status === "paid" || payout.status === "failed") return;
  const destination = findUser(db, payout.annotatorId)?.stripeAccountId;
  invariant(destination, "a payout has a destination");
  if (payout.status === "queued") {
    const transfer = (await findTransfer(payout)) ?? (await makeTransfer(payout, destination, nowMs));
    if (!transfer) return;
    const transaction = await transactionOf(transfer.balance_transaction);
    inTransaction(db, (tx) => noteTransfer(tx, payout.id, transfer.id, transaction, nowMs));
  }
  const sent = db.select().from(payouts).where(eq(payouts.id, payoutId)).get();
  if (sent?.status === "sent" && !sent.stripePayoutId) await sendToBank(sent, destination, nowMs);
}

/** The transfer of this payout, if one was made before. A group belongs to one payout. */
async function findTransfer(payout: PayoutRow): Promise<Stripe.Transfer | undefined> {
  const { data } = await stripe().transfers.list({ transfer_group: payout.id, limit: 10 });
  const own = data.filter((transfer) => transfer.metadata.payoutId === payout.id);
  invariant(own.length <= 1, `payout ${payout.id} has ${own.length} transfers`);
  return own[0];
}

async function makeTransfer(
  payout: PayoutRow,
  destination: string,
  nowMs: number,
): Promise<Stripe.Transfer | undefined> {
  try {
    return await stripe().transfers.create(
      {
        amount: payout.amountCents,
        currency: CURRENCY,
        destination,
        transfer_group: payout.id,
        metadata: { payoutId: payout.id },
      },
      { idempotencyKey: `transfer:${payout.id}:${payout.attempt}` },
    );
  } catch (error) {
    // A definite refusal: nothing moved. Everything else is unknown and is tried again with the same key.
    if (!(error instanceof Stripe.errors.StripeInvalidRequestError)) throw error;
    inTransaction(getDb(), (tx) => {
      if (error.code === "balance_insufficient") {
        waitForBalance(tx, payout, nowMs);
        raiseAlert(tx, {
          what: "a payout waits",
          detail: `Stripe's available balance does not cover payout ${payout.id} yet.`,
          nowMs,
        });
      } else voidPayout(tx, payout.id, "Stripe refused the transfer.", nowMs);
    });
    return undefined;
  }
}

/** Another attempt needs another key, or Stripe would replay the refusal. */
function waitForBalance(tx: Tx, payout: PayoutRow, nowMs: number): void {
  const attempt = payout.attempt + 1;
  const raised = tx
    .update(payouts)
    .set({ attempt })
    .where(and(eq(payouts.id, payout.id), eq(payouts.attempt, payout.attempt)))
    .run();
  if (raised.changes === 1) enqueuePayout(tx, payout.id, payout.annotatorId, nowMs, attempt);
}

/** Books the transfer and turns the payout from queued to sent; does nothing when that was done. */
export function noteTransfer(
  tx: Tx,
  payoutId: string,
  transferId: string,
  transaction: Transaction,
  nowMs: number,
): void {
  const payout = tx.select().from(payouts).where(eq(payouts.id, payoutId)).get();
  if (payout?.status !== "queued") return;
  invariant(transaction.net === -payout.amountCents, "the transfer is of the payout's amount");
  bookTransaction(tx, {
    transaction,
    kind: "transfer",
    posting: payoutSentPosting(payout.annotatorId, payout.amountCents),
    memo: "Payout sent",
    linkedTo: startOf(tx, payout.id),
    nowMs,
  });
  tx.update(payouts)
    .set({ stripeTransferId: transferId, status: "sent" })
    .where(eq(payouts.id, payout.id))
    .run();
  tell(
    tx,
    payout,
    "Your payout is on its way",
    [
      `${formatUsd(payout.amountCents)} has left for your bank account. It usually arrives within a few working days.`,
    ],
    nowMs,
  );
}

const startOf = (tx: Tx, payoutId: string) =>
  findPosting(tx, { source: "payout", sourceId: payoutId, kind: "start" })?.id ?? null;

async function sendToBank(payout: PayoutRow, destination: string, nowMs: number): Promise<void> {
  const db = getDb();
  try {
    const bank = await stripe().payouts.create(
      { amount: payout.amountCents, currency: CURRENCY, metadata: { payoutId: payout.id } },
      { stripeAccount: destination, idempotencyKey: `payout:${payout.id}:${payout.attempt}` },
    );
    // The webhook may have come before this answer, so only an empty field is filled.
    db.update(payouts)
      .set({ stripePayoutId: bank.id })
      .where(and(eq(payouts.id, payout.id), inArray(payouts.status, ["sent", "paid"])))
      .run();
  } catch (error) {
    if (!(error instanceof Stripe.errors.StripeInvalidRequestError)) throw error;
    if (error.code === "balance_insufficient") inTransaction(db, (tx) => waitForBalance(tx, payout, nowMs));
    else await bringBack(payout, "The payout to the bank was refused.", nowMs);
  }
}

/** Acts on the present state of a payout from an annotator's account to the bank. */
export async function settlePayout(stripePayoutId: string, account: string, nowMs: number): Promise<void> {
  const db = getDb();
  const found = await stripe().payouts.retrieve(stripePayoutId, {}, { stripeAccount: account });
  const payout =
    db.select().from(payouts).where(eq(payouts.stripePayoutId, stripePayoutId)).get() ??
    db
      .select()
      .from(payouts)
      .where(eq(payouts.id, found.metadata?.payoutId ?? ""))
      .get();
  if (!payout) {
    const detail = `Payout ${stripePayoutId} of account ${account} belongs to nobody here.`;
    inTransaction(db, (tx) => raiseAlert(tx, { what: "unknown payout", detail, nowMs }));
    return;
  }
  if (found.status === "paid") {
    inTransaction(db, (tx) => {
      const changed = tx
        .update(payouts)
        .set({ status: "paid", stripePayoutId, paidAtMs: nowMs })
        .where(and(eq(payouts.id, payout.id), eq(payouts.status, "sent")))
        .run();
      if (changed.changes === 1)
        tell(
          tx,
          payout,
          "Your payout arrived",
          [`${formatUsd(payout.amountCents)} has arrived at your bank.`],
          nowMs,
        );
    });
  } else if ((found.status === "failed" || found.status === "canceled") && payout.status !== "failed") {
    await bringBack(payout, found.failure_message ?? "The bank sent it back.", nowMs);
  }
}

/** Fetches a payout that did not arrive home from the annotator's account, once, and books it back. */
async function bringBack(payout: PayoutRow, failure: string, nowMs: number): Promise<void> {
  const transferId = payout.stripeTransferId;
  invariant(transferId, "what is brought back was sent");
  const transfer = await stripe().transfers.retrieve(transferId);
  if (!transfer.reversed) {
    await stripe().transfers.createReversal(
      transferId,
      { amount: transfer.amount - transfer.amount_reversed, metadata: { payoutId: payout.id } },
      { idempotencyKey: `reversal:${payout.id}:${transfer.amount_reversed}` },
    );
  }
  await settleReversals(transferId, nowMs, failure);
}

/**
 * Books every reversal of a transfer that is not booked yet: ours after a failed payout, or one that an admin
 * made at Stripe. When all of it is back, the payout has failed and can be asked for again.
 */
export async function settleReversals(
  transferId: string,
  nowMs: number,
  failure = "The transfer was taken back.",
): Promise<void> {
  const db = getDb();
  const transfer = await stripe().transfers.retrieve(transferId);
  const payoutId = transfer.metadata.payoutId ?? "";
  const known = db.select().from(payouts).where(eq(payouts.id, payoutId)).get();
  if (!known) {
    const detail = `Transfer ${transferId} was taken back and belongs to no payout of ours.`;
    inTransaction(db, (tx) => raiseAlert(tx, { what: "unknown transfer", detail, nowMs }));
    return;
  }
  const outgoing = await transactionOf(transfer.balance_transaction);
  const reversals: Transaction[] = [];
  for await (const reversal of stripe().transfers.listReversals(transferId, { limit: 100 })) {
    reversals.push(await transactionOf(reversal.balance_transaction));
  }
  inTransaction(db, (tx) => {
    noteTransfer(tx, payoutId, transferId, outgoing, nowMs); // the reversal may be heard of first
    const payout = tx.select().from(payouts).where(eq(payouts.id, payoutId)).get();
    invariant(payout, "the payout was there");
    for (const transaction of reversals) {
      bookTransaction(tx, {
        transaction,
        kind: "transfer-back",
        posting: payoutBackPosting(
          payout.annotatorId,
          transaction.net,
          bucketOf(transaction) === "pending" ? "stripe pending" : "stripe",
        ),
        memo: "Payout came back",
        linkedTo: startOf(tx, payoutId),
        nowMs,
      });
    }
    const backCents = reversals.reduce((sum, transaction) => sum + transaction.net, 0);
    invariant(backCents <= payout.amountCents, "no more comes back than was sent");
    if (backCents === payout.amountCents) markFailed(tx, payout, failure, nowMs);
  });
}

/** The transfer was never made: the money is payable again. */
function voidPayout(tx: Tx, payoutId: string, failure: string, nowMs: number): void {
  const payout = tx.select().from(payouts).where(eq(payouts.id, payoutId)).get();
  if (payout?.status !== "queued") return;
  insertPosting(tx, {
    source: "payout",
    sourceId: payoutId,
    kind: "void",
    posting: payoutBackPosting(payout.annotatorId, payout.amountCents, "transit"),
    memo: "Payout was not made",
    linkedTo: startOf(tx, payoutId),
    nowMs,
  });
  markFailed(tx, payout, failure, nowMs);
}

function markFailed(tx: Tx, payout: PayoutRow, failure: string, nowMs: number): void {
  if (payout.status === "failed") return;
  tx.update(payouts).set({ status: "failed", failure }).where(eq(payouts.id, payout.id)).run();
  tell(
    tx,
    payout,
    "Your payout came back",
    [
      `The payout of ${formatUsd(payout.amountCents)} did not arrive: ${failure}`,
      "The money is in your earnings again. Check the bank account and ask once more.",
    ],
    nowMs,
  );
}

function tell(tx: Tx, payout: PayoutRow, subject: string, lines: string[], nowMs: number): void {
  const person = findUser(tx, payout.annotatorId);
  if (!person) return;
  const action = { label: "Earnings", path: "/earnings" };
  post(tx, { to: person.email, subject, lines, action, tag: "payout" }, nowMs);
}
