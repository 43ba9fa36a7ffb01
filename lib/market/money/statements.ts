import { getDb, type Reader } from "@/db/client";
import { balanceBefore, billedWork, findTopUp, listStatementEntries } from "@/db/queries/statements";
import { findUser } from "@/db/queries/people";
import type { Actor } from "@/lib/auth/actor";
import { AppError, invariant } from "@/lib/errors";
import { formatUsd } from "@/lib/ledger/amounts";
import { accountId } from "@/lib/ledger/posting";
import { periodOf, statementOf, type Statement } from "@/lib/ledger/statement";
import { requireBatch, requireTeam } from "@/lib/market/access";
import { renderPaper, type Paper } from "./document";
import { batchMoney } from "./queries";

export type PdfFile = { fileName: string; bytes: Uint8Array };

const day = (atMs: number) => new Date(atMs).toISOString().slice(0, 10);

const LOCAL_LAW =
  "Tax on this is a matter of local law; ask a licensed adviser. Amounts are in US dollars, times in UTC.";

type Period = {
  year: number;
  /** 1 to 12; the whole year when left out. */
  month?: number;
};

/**
 * What moved an annotator's money in a month or a year: earned, corrected, paid out and come back. What is owed
 * counts against what is payable, so that pay which settled a debt shows as earned.
 */
export function earningsStatement(db: Reader, annotatorId: string, { year, month }: Period): Statement {
  const period = periodOf(year, month);
  const accounts = [accountId("payable", annotatorId), accountId("debt", annotatorId)];
  return statementOf(
    balanceBefore(db, accounts, period.fromMs),
    listStatementEntries(db, accounts, period),
    balanceBefore(db, accounts, period.toMs),
  );
}

/** What moved a team's wallet in a month or a year: card payments, batches held and returned, refunds. */
export function walletStatement(db: Reader, teamId: string, { year, month }: Period): Statement {
  const period = periodOf(year, month);
  const accounts = [accountId("wallet", teamId)];
  return statementOf(
    balanceBefore(db, accounts, period.fromMs),
    listStatementEntries(db, accounts, period),
    balanceBefore(db, accounts, period.toMs),
  );
}

const nameOf = ({ year, month }: Period) =>
  month === undefined ? String(year) : `${year}-${String(month).padStart(2, "0")}`;

/** An annotator's own earnings statement as PDF. */
export async function earningsPdf({
  actor,
  nowMs,
  ...period
}: Period & { actor: Actor; nowMs: number }): Promise<PdfFile> {
  const db = getDb();
  const person = findUser(db, actor.id);
  invariant(person, "the actor exists");
  const statement = earningsStatement(db, actor.id, checkPeriod(period));
  const paper: Paper = {
    title: `Earnings ${nameOf(period)}`,
    facts: [
      ["For", person.name],
      ["Made", day(nowMs)],
    ],
    lines: linesOf(statement),
    notes: [LOCAL_LAW],
  };
  return { fileName: `merestone-earnings-${nameOf(period)}.pdf`, bytes: await renderPaper(paper, nowMs) };
}

/** A team's wallet statement as PDF, for its members. */
export async function walletPdf({
  actor,
  nowMs,
  teamId,
  ...period
}: Period & { actor: Actor; nowMs: number; teamId: string }): Promise<PdfFile> {
  const db = getDb();
  requireTeam(db, teamId, actor, "viewer");
  const statement = walletStatement(db, teamId, checkPeriod(period));
  const paper: Paper = {
    title: `Wallet ${nameOf(period)}`,
    facts: [["Made", day(nowMs)]],
    lines: linesOf(statement),
    notes: [LOCAL_LAW],
  };
  return { fileName: `merestone-wallet-${nameOf(period)}.pdf`, bytes: await renderPaper(paper, nowMs) };
}

function checkPeriod(period: Period): Period {
  try {
    periodOf(period.year, period.month);
    return period;
  } catch (cause) {
    throw new AppError("invalid", "There is no such month or year.", {}, { cause });
  }
}

function linesOf({ openingCents, lines, closingCents }: Statement): Paper["lines"] {
  return [
    { text: "Before", amount: "", balance: formatUsd(openingCents) },
    ...lines.map((line) => ({
      when: day(line.atMs),
      text: line.memo,
      amount: formatUsd(line.cents),
      balance: formatUsd(line.balanceCents),
    })),
    {
      text: "After",
      amount: formatUsd(closingCents - openingCents),
      balance: formatUsd(closingCents),
      isSum: true,
    },
  ];
}

/** The receipt of one card payment as PDF, for the members of its team. */
export async function receiptPdf({
  actor,
  nowMs,
  topUpId,
}: {
  actor: Actor;
  nowMs: number;
  topUpId: string;
}): Promise<PdfFile> {
  const db = getDb();
  const found = findTopUp(db, topUpId);
  if (!found) throw new AppError("not_found", "There is no such payment.");
  const { topUp, teamName } = found;
  requireTeam(db, topUp.teamId, actor, "viewer");
  if (topUp.paidAtMs === null) throw new AppError("conflict", "This payment was not made.");
  const { amountCents, refundedCents } = topUp;
  const paper: Paper = {
    title: "Receipt",
    facts: [
      ["For", teamName],
      ["Number", topUp.id],
      ["Paid", `${day(topUp.paidAtMs)}, by card`],
    ],
    lines: [
      { text: "Into the wallet", amount: formatUsd(amountCents) },
      ...(refundedCents > 0 ? [{ text: "Back to the card", amount: formatUsd(-refundedCents) }] : []),
      { text: "Paid", amount: formatUsd(amountCents - refundedCents), isSum: true },
    ],
    notes: [
      "Money in the wallet is held for your batches; what they do not spend can go back to the card.",
      LOCAL_LAW,
    ],
  };
  return { fileName: `merestone-receipt-${topUp.id}.pdf`, bytes: await renderPaper(paper, nowMs) };
}

/** The invoice of a batch as PDF, as it stands now: pay of its settled work, and the fee. For its team. */
export async function invoicePdf({
  actor,
  nowMs,
  batchId,
}: {
  actor: Actor;
  nowMs: number;
  batchId: string;
}): Promise<PdfFile> {
  const db = getDb();
  const batch = requireBatch(db, batchId, actor);
  if (batch.status === "draft") throw new AppError("conflict", "This batch was not funded.");
  const work = billedWork(db, batchId);
  const money = batchMoney(db, batchId);
  invariant(
    work.payCents === money.releasedCents && work.feeCents === money.feeCents,
    "the invoice and the batch's money agree",
  );
  const billedCents = work.payCents + work.feeCents;
  const paper: Paper = {
    title: batch.status === "closed" ? "Invoice" : "Invoice so far",
    facts: [
      ["For", work.teamName],
      ["Batch", batch.title],
      ["Number", batch.id],
      ["Made", day(nowMs)],
    ],
    lines: [
      {
        text: `Pay to annotators: ${work.submissions} submissions for ${work.images} images`,
        amount: formatUsd(work.payCents),
      },
      {
        text: `Platform fee, ${batch.feeBps / 100} % of each, rounded down`,
        amount: formatUsd(work.feeCents),
      },
      { text: "Billed", amount: formatUsd(billedCents), isSum: true },
      { text: "Held when it was funded", amount: formatUsd(money.fundedCents) },
      { text: "Returned to the wallet", amount: formatUsd(money.returnedCents) },
      { text: "Still held", amount: formatUsd(money.remainingCents) },
    ],
    notes: ["Held = billed + returned + still held. The bill is never more than what was held.", LOCAL_LAW],
  };
  return { fileName: `merestone-invoice-${batch.id}.pdf`, bytes: await renderPaper(paper, nowMs) };
}
