import { and, asc, eq, lte } from "drizzle-orm";
import { getDb, inTransaction, type Reader, type Tx } from "@/db/client";
import { balanceOf } from "@/db/queries/ledger";
import { findUser } from "@/db/queries/people";
import { payoutSchedules } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import type { PayoutScheduleInput } from "@/lib/contracts/payments";
import { formatUsd } from "@/lib/ledger/amounts";
import { accountId } from "@/lib/ledger/posting";
import { audit } from "@/lib/market/audit";
import { post } from "@/lib/market/mail";
import { beginPayout } from "./payouts";

export type PayoutSchedule = typeof payoutSchedules.$inferSelect;

/** What an annotator who never chose has. */
export const DEFAULT_SCHEDULE = {
  rhythm: "never",
  weekday: 5,
  leastCents: 500,
  dueAtMs: null,
} as const satisfies Partial<PayoutSchedule>;

/** The hour of the day, UTC, at which scheduled payouts begin: banks of most places see them the same day. */
const HOUR_UTC = 6;
const DAY_MS = 86_400_000;

/**
 * The first due time after `afterMs`, UTC: the next such weekday at 06:00, or 06:00 on the first of the next
 * month. A worker that slept over several due times makes one payout, not several. Null for "never". Pure.
 */
export function nextDueMs(
  { rhythm, weekday }: Pick<PayoutSchedule, "rhythm" | "weekday">,
  afterMs: number,
): number | null {
  if (rhythm === "never") return null;
  const after = new Date(afterMs);
  const [year, month, day] = [after.getUTCFullYear(), after.getUTCMonth(), after.getUTCDate()];
  if (rhythm === "monthly") {
    const thisMonthMs = Date.UTC(year, month, 1, HOUR_UTC);
    return thisMonthMs > afterMs ? thisMonthMs : Date.UTC(year, month + 1, 1, HOUR_UTC);
  }
  const todayMs = Date.UTC(year, month, day, HOUR_UTC);
  const daysAhead = (weekday - after.getUTCDay() + 7) % 7; // Sunday is 0 there and 7 here: alike modulo 7
  const dueMs = todayMs + daysAhead * DAY_MS;
  return dueMs > afterMs ? dueMs : dueMs + 7 * DAY_MS;
}

export function findPayoutSchedule(db: Reader, annotatorId: string): PayoutSchedule | undefined {
  return db.select().from(payoutSchedules).where(eq(payoutSchedules.annotatorId, annotatorId)).get();
}

/** Keeps the annotator's choice. Returns when the first payout by it is due, null for "never". */
export function setPayoutSchedule({
  actor,
  nowMs,
  input,
}: {
  actor: Actor;
  nowMs: number;
  input: PayoutScheduleInput;
}): { dueAtMs: number | null } {
  return inTransaction(getDb(), (tx) => {
    const dueAtMs = nextDueMs(input, nowMs);
    const row = { ...input, dueAtMs, changedAtMs: nowMs };
    tx.insert(payoutSchedules)
      .values({ annotatorId: actor.id, ...row })
      .onConflictDoUpdate({ target: payoutSchedules.annotatorId, set: row })
      .run();
    audit(tx, { actorId: actor.id, action: "payout.schedule", subject: actor.id, detail: input, nowMs });
    return { dueAtMs };
  });
}

/**
 * Begins the payouts that are due. Each schedule is one transaction that moves its due time on, so a run that
 * is repeated, or that two workers make at once, pays once. What is below the least waits for the next time.
 */
export function payOnSchedule({ nowMs }: { nowMs: number }): { begun: number } {
  const db = getDb();
  const due = db
    .select({ annotatorId: payoutSchedules.annotatorId })
    .from(payoutSchedules)
    .where(lte(payoutSchedules.dueAtMs, nowMs))
    .orderBy(asc(payoutSchedules.dueAtMs), asc(payoutSchedules.annotatorId))
    .all();
  let begun = 0;
  for (const { annotatorId } of due) {
    if (inTransaction(db, (tx) => payOne(tx, annotatorId, nowMs))) begun += 1;
  }
  return { begun };
}

function payOne(tx: Tx, annotatorId: string, nowMs: number): boolean {
  const schedule = findPayoutSchedule(tx, annotatorId);
  const person = findUser(tx, annotatorId);
  if (!schedule?.dueAtMs || schedule.dueAtMs > nowMs || !person) return false; // another worker was first
  tx.update(payoutSchedules)
    .set({ dueAtMs: nextDueMs(schedule, nowMs) })
    .where(and(eq(payoutSchedules.annotatorId, annotatorId)))
    .run();
  const amountCents = balanceOf(tx, accountId("payable", annotatorId));
  if (amountCents < schedule.leastCents || person.status !== "active") return false;
  if (!person.stripeAccountId || !person.payoutsEnabled) {
    post(
      tx,
      {
        to: person.email,
        subject: "Your payout could not begin",
        lines: [
          `${formatUsd(amountCents)} was to be paid out today, but there is no bank account that is ready to take it.`,
          "The money is kept for you. Register an account, and it goes out at the next time you chose.",
        ],
        action: { label: "Earnings", path: "/earnings" },
        tag: "payout",
      },
      nowMs,
    );
    return false;
  }
  beginPayout(tx, { annotatorId, amountCents, scheduledForMs: schedule.dueAtMs, nowMs });
  return true;
}
