/**
 * The objects that are kept, with the fields that change spelled out; `Rest` holds the fields of the API version
 * that never change here. Fields that begin with an underscore are ours and never leave (see `present`).
 */
export type Metadata = Record<string, string>;
export type Rest = { readonly [field: string]: unknown };
export type Kept = { id: string; object: string; created: number; _account: string };

export type Session = Kept & {
  object: "checkout.session";
  status: "open" | "complete" | "expired";
  payment_status: "paid" | "unpaid";
  amount_total: number;
  payment_intent: string | null;
  success_url: string | null;
  cancel_url: string | null;
  customer: string | null;
  expires_at: number;
  url: string | null;
  metadata: Metadata;
  _items: LineItem[];
  _intent: {
    metadata: Metadata;
    description: string | null;
    transfer_group: string | null;
    receipt_email: string | null;
    capture_method: CaptureMethod;
  };
  _error: string | null;
  rest: Rest;
};

export type LineItem = {
  id: string;
  object: "item";
  amount_total: number;
  description: string | null;
  quantity: number;
  rest: Rest;
};

export type CaptureMethod = "automatic" | "automatic_async" | "manual";
export type PaymentError = {
  type: "card_error";
  code: string;
  decline_code?: string;
  message: string;
  charge?: string;
  param?: string;
  doc_url?: string;
};

export type Intent = Kept & {
  object: "payment_intent";
  amount: number;
  amount_capturable: number;
  amount_received: number;
  status:
    | "requires_payment_method"
    | "requires_confirmation"
    | "requires_action"
    | "processing"
    | "requires_capture"
    | "canceled"
    | "succeeded";
  capture_method: CaptureMethod;
  latest_charge: string | null;
  last_payment_error: PaymentError | null;
  payment_method: string | null;
  next_action: Rest | null;
  canceled_at: number | null;
  cancellation_reason: string | null;
  customer: string | null;
  description: string | null;
  metadata: Metadata;
  transfer_group: string | null;
  receipt_email: string | null;
  _card: string | null;
  _session: string | null;
  _returnUrl: string | null;
  rest: Rest;
};

export type Charge = Kept & {
  object: "charge";
  amount: number;
  amount_captured: number;
  amount_refunded: number;
  captured: boolean;
  paid: boolean;
  refunded: boolean;
  disputed: boolean;
  status: "pending" | "succeeded" | "failed";
  balance_transaction: string | null;
  payment_intent: string | null;
  payment_method: string | null;
  failure_code: string | null;
  failure_message: string | null;
  source_transfer: string | null;
  transfer_group: string | null;
  description: string | null;
  metadata: Metadata;
  receipt_url: string | null;
  _card: string | null;
  /** What transfers have already taken of it through `source_transaction`. */
  _transferred: number;
  rest: Rest;
};

export type Refund = Kept & {
  object: "refund";
  amount: number;
  charge: string | null;
  payment_intent: string | null;
  status: "pending" | "succeeded" | "failed" | "canceled";
  balance_transaction: string | null;
  failure_balance_transaction?: string;
  failure_reason?: string;
  reason: string | null;
  metadata: Metadata;
  source_transfer_reversal: string | null;
  rest: Rest;
};

export type Dispute = Kept & {
  object: "dispute";
  amount: number;
  charge: string;
  payment_intent: string | null;
  status: "needs_response" | "under_review" | "won" | "lost";
  balance_transactions: string[];
  evidence: Record<string, string | null | Rest>;
  evidence_details: {
    due_by: number;
    enhanced_eligibility: Rest;
    has_evidence: boolean;
    past_due: boolean;
    submission_count: number;
    submission_method: "manual" | "not_submitted";
  };
  is_charge_refundable: boolean;
  metadata: Metadata;
  rest: Rest;
};

export type Bank = {
  id: string;
  object: "bank_account";
  account: string;
  last4: string;
  status: string;
  default_for_currency: boolean;
  account_holder_name: string | null;
  metadata: Metadata;
  _number: string;
  rest: Rest;
};

export type CapabilityStatus = "active" | "inactive" | "pending";
export type Requirements = {
  currently_due: string[];
  eventually_due: string[];
  past_due: string[];
  pending_verification: string[];
  disabled_reason: string | null;
  rest: Rest;
};

export type Account = Kept & {
  object: "account";
  type: "express" | "custom" | "standard" | "none";
  email: string | null;
  country: string;
  business_type: string | null;
  charges_enabled: boolean;
  payouts_enabled: boolean;
  details_submitted: boolean;
  capabilities: { transfers?: CapabilityStatus; card_payments?: CapabilityStatus };
  requirements: Requirements;
  metadata: Metadata;
  _banks: Bank[];
  rest: Rest;
};

export type Transfer = Kept & {
  object: "transfer";
  amount: number;
  amount_reversed: number;
  reversed: boolean;
  balance_transaction: string;
  destination: string;
  destination_payment: string;
  description: string | null;
  source_transaction: string | null;
  transfer_group: string | null;
  metadata: Metadata;
  rest: Rest;
};

export type Reversal = Kept & {
  object: "transfer_reversal";
  amount: number;
  balance_transaction: string;
  destination_payment_refund: string;
  transfer: string;
  metadata: Metadata;
  rest: Rest;
};

export type Payout = Kept & {
  object: "payout";
  amount: number;
  status: "pending" | "in_transit" | "paid" | "failed" | "canceled";
  arrival_date: number;
  automatic: boolean;
  balance_transaction: string;
  failure_balance_transaction: string | null;
  failure_code: string | null;
  failure_message: string | null;
  destination: string | null;
  description: string | null;
  statement_descriptor: string | null;
  reversed_by: string | null;
  metadata: Metadata;
  rest: Rest;
};

export type TopUp = Kept & {
  object: "topup";
  amount: number;
  status: "pending" | "succeeded" | "canceled";
  balance_transaction: string | null;
  description: string | null;
  metadata: Metadata;
  transfer_group: string | null;
  rest: Rest;
};

export type TransactionType =
  | "charge"
  | "refund"
  | "refund_failure"
  | "transfer"
  | "transfer_refund"
  | "payment"
  | "payment_refund"
  | "payout"
  | "payout_cancel"
  | "payout_failure"
  | "adjustment"
  | "topup";

export type Transaction = Kept & {
  object: "balance_transaction";
  type: TransactionType;
  amount: number;
  fee: number;
  net: number;
  available_on: number;
  reporting_category: string;
  source: string;
  description: string | null;
  /** When its money may be used, to the millisecond: a whole second would delay what is due at once. */
  _availableAtMs: number;
  rest: Rest;
};

export type Customer = Kept & {
  object: "customer";
  email: string | null;
  name: string | null;
  description: string | null;
  phone: string | null;
  metadata: Metadata;
  deleted?: true;
  rest: Rest;
};

export type PaymentMethod = Kept & {
  object: "payment_method";
  type: "card";
  customer: string | null;
  metadata: Metadata;
  _card: string;
  rest: Rest;
};

export type Endpoint = Kept & {
  object: "webhook_endpoint";
  url: string;
  enabled_events: string[];
  status: "enabled" | "disabled";
  description: string | null;
  metadata: Metadata;
  _secrets: { secret: string; untilMs: number | null }[];
  _isConnect: boolean | null;
  rest: Rest;
};

export type Event = Kept & {
  object: "event";
  type: string;
  account?: string;
  data: { object: unknown; previous_attributes?: Rest };
  request: { id: string | null; idempotency_key: string | null } | null;
  rest: Rest;
};

/** As it leaves: own fields dropped, constant fields laid open. Copies, so that an event keeps its moment. */
export function present(value: unknown): unknown {
  if (Array.isArray(value)) return value.map(present);
  if (typeof value !== "object" || value === null) return value;
  const result: Record<string, unknown> = {};
  for (const [name, inner] of Object.entries(value)) {
    if (name === "rest" && typeof inner === "object" && inner !== null)
      for (const [key, constant] of Object.entries(inner)) result[key] = present(constant);
    else if (name === "metadata" && typeof inner === "object")
      result[name] = { ...inner }; // whatever its keys are called
    else if (!name.startsWith("_")) result[name] = present(inner);
  }
  return result;
}

export const EMPTY_ADDRESS: Rest = {
  city: null,
  country: null,
  line1: null,
  line2: null,
  postal_code: null,
  state: null,
};
export const emptyList = (url: string): Rest => ({ object: "list", data: [], has_more: false, url });
