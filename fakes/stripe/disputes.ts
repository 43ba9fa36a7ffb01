import { invalid } from "./errors";
import type { Params } from "./form";
import type { Charge, Dispute } from "./objects";
import { brandOf } from "./cards";
import type { World } from "./world";

const EVIDENCE_FIELDS = [
  "access_activity_log",
  "billing_address",
  "cancellation_policy",
  "cancellation_policy_disclosure",
  "cancellation_rebuttal",
  "customer_communication",
  "customer_email_address",
  "customer_name",
  "customer_purchase_ip",
  "customer_signature",
  "duplicate_charge_documentation",
  "duplicate_charge_explanation",
  "duplicate_charge_id",
  "product_description",
  "receipt",
  "refund_policy",
  "refund_policy_disclosure",
  "refund_refusal_explanation",
  "service_date",
  "service_documentation",
  "shipping_address",
  "shipping_carrier",
  "shipping_date",
  "shipping_documentation",
  "shipping_tracking_number",
  "uncategorized_file",
  "uncategorized_text",
] as const;

const RESPOND_DAYS = 9;
const REVIEW_MS = 200;

/** The card holder's bank takes the money back, and a fee with it. */
export function openDispute(world: World, charge: Charge, reason = "fraudulent"): Dispute {
  const account = charge._account;
  const amount = charge.amount_captured - charge.amount_refunded;
  const kept = world.kept("dp", account);
  const transaction = world.book(account, "adjustment", -amount, kept.id, {
    fee: world.settings.disputeFeeCents,
    feeDescription: "Dispute fee",
  });
  transaction.description = `Chargeback withdrawal for ${charge.id}`;
  const dispute = world.save(world.disputes, {
    ...kept,
    object: "dispute",
    amount,
    charge: charge.id,
    payment_intent: charge.payment_intent,
    status: "needs_response",
    balance_transactions: [transaction.id],
    evidence: { ...Object.fromEntries(EVIDENCE_FIELDS.map((field) => [field, null])), enhanced_evidence: {} },
    evidence_details: {
      due_by: kept.created + RESPOND_DAYS * 86_400,
      enhanced_eligibility: {},
      has_evidence: false,
      past_due: false,
      submission_count: 0,
      submission_method: "not_submitted",
    },
    is_charge_refundable: false,
    metadata: {},
    rest: {
      currency: "usd",
      enhanced_eligibility_types: [],
      intended_submission_method: null,
      livemode: false,
      payment_method_details: {
        type: "card",
        card: {
          brand: brandOf(charge._card ?? ""),
          case_type: "chargeback",
          network: brandOf(charge._card ?? ""),
          network_reason_code: "10.4",
        },
      },
      reason,
    },
  });
  charge.disputed = true;
  world.save(world.charges, charge);
  world.emit("charge.dispute.created", dispute, { account });
  world.emit("charge.dispute.funds_withdrawn", dispute, { account });
  world.later("lapse-dispute", dispute.id, RESPOND_DAYS * 86_400_000);
  return dispute;
}

/** Evidence is kept; submitted evidence is decided by the documented words "winning_evidence" and "losing_evidence". */
export function updateDispute(world: World, dispute: Dispute, params: Params): Dispute {
  if (dispute.status !== "needs_response")
    throw invalid("This dispute is already closed or under review.", "resource_invalid_state");
  const evidence = params.nested("evidence");
  for (const field of EVIDENCE_FIELDS)
    if (evidence.has(field)) dispute.evidence[field] = evidence.optional(field);
  dispute.metadata = params.metadata(dispute.metadata);
  dispute.evidence_details.has_evidence = EVIDENCE_FIELDS.some((field) => dispute.evidence[field] !== null);
  // Stripe submits at once unless told not to; evidence staged with submit=false waits.
  if (evidence.form && Object.keys(evidence.form).length > 0 && params.flag("submit") !== false) {
    dispute.status = "under_review";
    dispute.evidence_details.submission_count += 1;
    dispute.evidence_details.submission_method = "manual";
    world.timers.delete(`lapse-dispute:${dispute.id}`);
    const words = dispute.evidence.uncategorized_text;
    if (words === "winning_evidence" || words === "losing_evidence")
      world.later(words === "winning_evidence" ? "win-dispute" : "lose-dispute", dispute.id, REVIEW_MS);
  }
  world.save(world.disputes, dispute);
  world.emit("charge.dispute.updated", dispute, { account: dispute._account });
  return dispute;
}

/** The bank decides. A dispute that is won gives the money back, but not the fee. */
export function closeDispute(world: World, dispute: Dispute, outcome: "won" | "lost"): Dispute {
  if (dispute.status === "won" || dispute.status === "lost")
    throw invalid("This dispute is already closed.", "resource_invalid_state");
  dispute.status = outcome;
  world.timers.delete(`lapse-dispute:${dispute.id}`);
  if (outcome === "won") {
    const transaction = world.book(dispute._account, "adjustment", dispute.amount, dispute.id);
    transaction.reporting_category = "dispute_reversal";
    transaction.description = `Chargeback reversal for ${dispute.charge}`;
    dispute.balance_transactions.push(transaction.id);
  }
  world.save(world.disputes, dispute);
  world.emit("charge.dispute.closed", dispute, { account: dispute._account });
  if (outcome === "won")
    world.emit("charge.dispute.funds_reinstated", dispute, { account: dispute._account });
  return dispute;
}
