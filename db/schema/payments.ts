import { index, integer, sqliteTable, text, uniqueIndex } from "drizzle-orm/sqlite-core";
import { teams, users } from "./people";

/** Card payments into a team's wallet. The row is written before Stripe is called. */
export const topUps = sqliteTable(
  "top_ups",
  {
    id: text("id").primaryKey(),
    teamId: text("team_id")
      .notNull()
      .references(() => teams.id),
    createdBy: text("created_by")
      .notNull()
      .references(() => users.id),
    amountCents: integer("amount_cents").notNull(),
    status: text("status", { enum: ["open", "paid", "expired", "disputed"] }).notNull(),
    stripeSessionId: text("stripe_session_id").unique(),
    stripePaymentIntentId: text("stripe_payment_intent_id"),
    stripeChargeId: text("stripe_charge_id"),
    refundedCents: integer("refunded_cents").notNull().default(0),
    createdAtMs: integer("created_at_ms").notNull(),
    paidAtMs: integer("paid_at_ms"),
  },
  (t) => [
    index("top_ups_team").on(t.teamId, t.createdAtMs),
    index("top_ups_intent").on(t.stripePaymentIntentId),
  ],
);

/** Money on its way back to a card. */
export const refunds = sqliteTable(
  "refunds",
  {
    id: text("id").primaryKey(),
    topUpId: text("top_up_id")
      .notNull()
      .references(() => topUps.id),
    teamId: text("team_id")
      .notNull()
      .references(() => teams.id),
    amountCents: integer("amount_cents").notNull(),
    status: text("status", { enum: ["queued", "sent", "failed"] }).notNull(),
    stripeRefundId: text("stripe_refund_id").unique(),
    failure: text("failure"),
    createdAtMs: integer("created_at_ms").notNull(),
  },
  (t) => [index("refunds_team").on(t.teamId, t.createdAtMs)],
);

/** Money on its way to an annotator: one row, one transfer, ever. */
export const payouts = sqliteTable(
  "payouts",
  {
    id: text("id").primaryKey(),
    annotatorId: text("annotator_id")
      .notNull()
      .references(() => users.id),
    amountCents: integer("amount_cents").notNull(),
    status: text("status", { enum: ["queued", "sent", "paid", "failed"] }).notNull(),
    attempt: integer("attempt").notNull().default(1),
    stripeTransferId: text("stripe_transfer_id").unique(),
    stripePayoutId: text("stripe_payout_id").unique(),
    failure: text("failure"),
    /** The due time of the schedule that asked for it; null when the annotator asked. One payout a due time. */
    scheduledForMs: integer("scheduled_for_ms"),
    createdAtMs: integer("created_at_ms").notNull(),
    paidAtMs: integer("paid_at_ms"),
  },
  (t) => [
    index("payouts_annotator").on(t.annotatorId, t.createdAtMs),
    uniqueIndex("payouts_scheduled").on(t.annotatorId, t.scheduledForMs),
  ],
);

/** When an annotator wants to be paid without asking. No row is the same as "never". */
export const payoutSchedules = sqliteTable(
  "payout_schedules",
  {
    annotatorId: text("annotator_id")
      .primaryKey()
      .references(() => users.id),
    rhythm: text("rhythm", { enum: ["never", "weekly", "monthly"] }).notNull(),
    /** ISO 8601 weekday, 1 Monday to 7 Sunday; used by the weekly rhythm. */
    weekday: integer("weekday").notNull(),
    /** Less than this waits for the next time. */
    leastCents: integer("least_cents").notNull(),
    /** When the next payout is due; null for "never". */
    dueAtMs: integer("due_at_ms"),
    changedAtMs: integer("changed_at_ms").notNull(),
  },
  (t) => [index("payout_schedules_due").on(t.dueAtMs)],
);

/** Signed events of Stripe, each kept once. */
export const stripeEvents = sqliteTable("stripe_events", {
  id: text("id").primaryKey(),
  type: text("type").notNull(),
  account: text("account"),
  payload: text("payload", { mode: "json" }).$type<{ data: { object: { id: string } } }>().notNull(),
  receivedAtMs: integer("received_at_ms").notNull(),
  processedAtMs: integer("processed_at_ms"),
});
