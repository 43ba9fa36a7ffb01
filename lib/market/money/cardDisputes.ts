import { eq } from "drizzle-orm";
import { getDb, inTransaction, type Tx } from "@/db/client";
import { balanceOf, findPosting, insertPosting, raiseAlert } from "@/db/queries/ledger";
import { topUps } from "@/db/schema";
import { invariant } from "@/lib/errors";
import { formatUsd } from "@/lib/ledger/amounts";
import { accountId } from "@/lib/ledger/posting";
import { disputeClosedPosting, disputeMovePosting, freezePosting } from "@/lib/ledger/postings";
import { stripe } from "@/lib/services/stripeClient";
import { bookTransaction, bucketOf, toTransaction, type Transaction } from "./balanceTransactions";
import { settleCharge } from "./checkout";

const OVER = ["won", "lost", "warning_closed"];

/**
 * Acts on the present state of a card dispute: what the wallet has of the contested amount is frozen, what
 * Stripe takes and gives back is booked against the dispute's hold, and when it is over the hold is emptied into
 * the wallet or into the platform's loss. An annotator's money is never touched.
 */
export async function settleCardDispute(disputeId: string, nowMs: number): Promise<void> {
  const dispute = await stripe().disputes.retrieve(disputeId);
  const chargeId = typeof dispute.charge === "string" ? dispute.charge : dispute.charge.id;
  const moves = dispute.balance_transactions.map(toTransaction);
  await settleCharge(chargeId, nowMs); // the dispute may be heard of before its payment
  inTransaction(getDb(), (tx) => {
    const topUp = tx.select().from(topUps).where(eq(topUps.stripeChargeId, chargeId)).get();
    if (!topUp) {
      // Its money goes to suspense with the next reconciliation.
      const detail = `Card dispute ${disputeId} is about no payment of ours.`;
      return raiseAlert(tx, { what: "unknown card dispute", detail, nowMs });
    }
    if (findPosting(tx, { source: "stripe", sourceId: disputeId, kind: "dispute-closed" })) return;
    const { teamId } = topUp;
    if (dispute.status !== "won")
      freeze(tx, { disputeId, topUpId: topUp.id, teamId, amountCents: dispute.amount, nowMs });
    for (const transaction of moves) bookMove(tx, disputeId, transaction, nowMs);
    if (!OVER.includes(dispute.status)) return;
    const heldCents = balanceOf(tx, accountId("hold", disputeId));
    const isLost = dispute.status === "lost";
    // A dispute that is won brings the money back in a transaction of its own, sometimes a moment later.
    if (!isLost && heldCents < 0)
      throw new Error(`card dispute ${disputeId} was won and is not paid back yet`);
    if (heldCents !== 0) {
      insertPosting(tx, {
        source: "stripe",
        sourceId: disputeId,
        kind: "dispute-closed",
        posting: disputeClosedPosting(teamId, disputeId, heldCents),
        memo: isLost ? "Card dispute lost" : "Card dispute won",
        nowMs,
      });
    }
    // What a lost dispute took is no longer there to be refunded, and Stripe refuses it.
    if (!isLost) tx.update(topUps).set({ status: "paid" }).where(eq(topUps.id, topUp.id)).run();
  });
}

type Freeze = { disputeId: string; topUpId: string; teamId: string; amountCents: number; nowMs: number };

function freeze(tx: Tx, { disputeId, topUpId, teamId, amountCents, nowMs }: Freeze): void {
  const topUp = tx.select().from(topUps).where(eq(topUps.id, topUpId)).get();
  invariant(topUp, "the top-up was there");
  if (topUp.status === "disputed") return; // frozen already, perhaps with nothing in the wallet
  const frozenCents = Math.min(amountCents, balanceOf(tx, accountId("wallet", teamId)));
  if (frozenCents > 0) {
    insertPosting(tx, {
      source: "stripe",
      sourceId: disputeId,
      kind: "dispute-freeze",
      posting: freezePosting(teamId, disputeId, frozenCents),
      memo: "Held for a card dispute",
      nowMs,
    });
  }
  tx.update(topUps).set({ status: "disputed" }).where(eq(topUps.id, topUpId)).run();
  const detail = `A card holder disputes ${formatUsd(amountCents)} of team ${teamId}; ${formatUsd(frozenCents)} of its wallet is held.`;
  raiseAlert(tx, { what: "card dispute", detail, nowMs });
}

function bookMove(tx: Tx, disputeId: string, transaction: Transaction, nowMs: number): void {
  bookTransaction(tx, {
    transaction,
    kind: "dispute",
    posting: disputeMovePosting({
      disputeId,
      amountCents: transaction.amount,
      feeCents: transaction.fee,
      bucket: bucketOf(transaction),
    }),
    memo: transaction.amount < 0 ? "Taken for a card dispute" : "Given back after a card dispute",
    nowMs,
  });
}
