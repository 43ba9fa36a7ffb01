import { index, integer, sqliteTable, text } from "drizzle-orm/sqlite-core";
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
    createdAtMs: integer("created_at_ms").notNull(),
    paidAtMs: integer("paid_at_ms"),
  },
  (t) => [index("payouts_annotator").on(t.annotatorId, t.createdAtMs)],
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
