import { getDb } from "@/db/client";
import { balanceOf, ledgerViolations, raiseAlert } from "@/db/queries/ledger";
import { accountId } from "@/lib/ledger/posting";
import { stripe } from "@/lib/services/stripeClient";

export type Reconciliation = { ledgerCents: number; stripeCents: number; violations: string[] };

/** Compares the ledger with Stripe's balance and itself; what differs raises an alert for a person. */
export async function reconcile({ nowMs }: { nowMs: number }): Promise<Reconciliation> {
  const balance = await stripe().balance.retrieve();
  const sum = (rows: { amount: number; currency: string }[]) =>
    rows.reduce((total, row) => total + row.amount, 0);
  const stripeCents = sum(balance.available) + sum(balance.pending);
  const db = getDb();
  const ledgerCents = -balanceOf(db, accountId("stripe"));
  const violations = ledgerViolations(db);
  for (const violation of violations) raiseAlert(db, { what: "ledger", detail: violation, nowMs });
  if (ledgerCents !== stripeCents) {
    raiseAlert(db, {
      what: "Stripe differs",
      detail: `Stripe keeps ${stripeCents} cents, the ledger says ${ledgerCents}.`,
      nowMs,
    });
  }
  return { ledgerCents, stripeCents, violations };
}
