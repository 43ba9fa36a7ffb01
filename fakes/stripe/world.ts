import { randomBytes } from "node:crypto";
import type { Clock } from "../shared/clock";
import { Documents, type Table } from "../shared/tables";
import { noSuch } from "./errors";
import {
  present,
  type Account,
  type Charge,
  type Customer,
  type Dispute,
  type Endpoint,
  type Event,
  type Intent,
  type Kept,
  type PaymentMethod,
  type Payout,
  type Refund,
  type Rest,
  type Reversal,
  type Session,
  type TopUp,
  type Transaction,
  type TransactionType,
  type Transfer,
} from "./objects";

export const API_VERSION = "2026-10-28.endive";

/** Our own account, whose key the requests carry. */
export const PLATFORM = "acct_1LocalPlatform000";

export type Settings = {
  /** How long the money of a card payment is pending. Stripe's test mode holds it for days; a demo for none. */
  settleMs: number;
  /** From one state of a payout to the next: pending, in transit, paid or failed. */
  payoutStepMs: number;
  /** How long the details of an onboarded account are looked at. */
  verifyMs: number;
  /** Charged for each dispute that is received (Stripe's published price in the United States: $15.00). */
  disputeFeeCents: number;
};

export type AccountLink = {
  token: string;
  account: string;
  returnUrl: string;
  refreshUrl: string;
  expiresMs: number;
  isUsed: boolean;
};
export type KeptAnswer = { digest: string; status: number; body: unknown; atMs: number };
/** Something that happens by itself later, kept so that a restart does not forget it. */
export type Timer = { id: string; kind: string; subject: string; dueMs: number };

/** Card fee: 2.9 % and 30 cents, Stripe's published price for cards in the United States. */
export const cardFeeCents = (amount: number): number => Math.round((amount * 29) / 1000) + 30;

const CATEGORIES: Partial<Record<TransactionType, string>> = {
  payment: "charge",
  payment_refund: "refund",
  transfer_refund: "transfer_reversal",
  payout_failure: "payout_reversal",
  payout_cancel: "payout_reversal",
  adjustment: "dispute",
};

/** Everything that this Stripe knows, and the few ways in which it changes. */
export class World {
  readonly sessions: Table<Session>;
  readonly intents: Table<Intent>;
  readonly charges: Table<Charge>;
  readonly refunds: Table<Refund>;
  readonly disputes: Table<Dispute>;
  readonly accounts: Table<Account>;
  readonly links: Table<AccountLink>;
  readonly transfers: Table<Transfer>;
  readonly reversals: Table<Reversal>;
  readonly payouts: Table<Payout>;
  readonly topups: Table<TopUp>;
  readonly transactions: Table<Transaction>;
  readonly customers: Table<Customer>;
  readonly methods: Table<PaymentMethod>;
  readonly endpoints: Table<Endpoint>;
  readonly events: Table<Event>;
  readonly keys: Table<KeptAnswer>;
  readonly timers: Table<Timer>;
  /** Set while a request is worked on, for the events that it causes. */
  request: { id: string; key: string | null } | null = null;
  onEvent: (event: Event) => void = () => undefined;
  baseUrl = "http://127.0.0.1";
  private sums = new Map<string, Sum>();

  constructor(
    readonly documents: Documents,
    readonly clock: Clock,
    readonly settings: Settings,
  ) {
    this.sessions = documents.table("session");
    this.intents = documents.table("intent");
    this.charges = documents.table("charge");
    this.refunds = documents.table("refund");
    this.disputes = documents.table("dispute");
    this.accounts = documents.table("account");
    this.links = documents.table("link");
    this.transfers = documents.table("transfer");
    this.reversals = documents.table("reversal");
    this.payouts = documents.table("payout");
    this.topups = documents.table("topup");
    this.transactions = documents.table("transaction");
    this.customers = documents.table("customer");
    this.methods = documents.table("method");
    this.endpoints = documents.table("endpoint");
    this.events = documents.table("event");
    this.keys = documents.table("key");
    this.timers = documents.table("timer");
    for (const transaction of this.transactions.values()) this.count(transaction);
  }

  id(prefix: string): string {
    return `${prefix}_${randomBytes(12).toString("hex")}`;
  }

  kept(prefix: string, account: string): { id: string; created: number; _account: string } {
    return { id: this.id(prefix), created: this.clock.nowSeconds(), _account: account };
  }

  /** The row, which must belong to the account that asks. */
  get<T extends Kept>(table: Table<T>, what: string, id: string, account: string, param?: string): T {
    const row = table.find(id);
    if (!row || row._account !== account) throw noSuch(what, id, param);
    return row;
  }

  save<T extends Kept>(table: Table<T>, row: T): T {
    return table.put(row.id, row);
  }

  /** Books an amount less a fee to an account's balance; available at once unless told otherwise. */
  book(
    account: string,
    type: TransactionType,
    amount: number,
    source: string,
    { fee = 0, availableAtMs = this.clock.nowMs(), feeDescription = "Stripe processing fees" } = {},
  ): Transaction {
    const transaction: Transaction = {
      ...this.kept("txn", account),
      object: "balance_transaction",
      type,
      amount,
      fee,
      net: amount - fee,
      available_on: Math.ceil(availableAtMs / 1000),
      reporting_category: CATEGORIES[type] ?? type,
      source,
      description: null,
      _availableAtMs: availableAtMs,
      rest: {
        currency: "usd",
        balance_type: "payments",
        exchange_rate: null,
        fee_details:
          fee === 0
            ? []
            : [
                {
                  amount: fee,
                  application: null,
                  currency: "usd",
                  description: feeDescription,
                  type: "stripe_fee",
                },
              ],
      },
    };
    this.count(transaction);
    return this.save(this.transactions, transaction);
  }

  private count({ _account, net, _availableAtMs }: Transaction): void {
    let sum = this.sums.get(_account);
    if (!sum) this.sums.set(_account, (sum = { available: 0, pending: [] }));
    if (_availableAtMs <= this.clock.nowMs()) sum.available += net;
    else sum.pending.push({ net, atMs: _availableAtMs });
  }

  /** Cents that may be used now, and cents that may be used later. */
  balance(account: string): { available: number; pending: number } {
    const sum = this.sums.get(account);
    if (!sum) return { available: 0, pending: 0 };
    const nowMs = this.clock.nowMs();
    const still = sum.pending.filter(({ atMs }) => atMs > nowMs);
    if (still.length < sum.pending.length) {
      for (const { net, atMs } of sum.pending) if (atMs <= nowMs) sum.available += net;
      sum.pending = still;
    }
    return { available: sum.available, pending: still.reduce((total, { net }) => total + net, 0) };
  }

  isAvailable(transaction: Transaction): boolean {
    return transaction._availableAtMs <= this.clock.nowMs();
  }

  /** Notes that something happened. The object is copied as it stands now. */
  emit(
    type: string,
    object: Kept | { id: string; object: string },
    { account, previous }: { account?: string | undefined; previous?: Rest } = {},
  ): void {
    const event: Event = {
      ...this.kept("evt", account ?? PLATFORM),
      object: "event",
      type,
      ...(account && account !== PLATFORM && { account }),
      data: { object: this.render(object), ...(previous && { previous_attributes: previous }) },
      request: this.request ? { id: this.request.id, idempotency_key: this.request.key } : null,
      rest: { api_version: API_VERSION, livemode: false, pending_webhooks: this.endpoints.size },
    };
    this.save(this.events, event);
    this.onEvent(event);
  }

  /** As it leaves over the wire, with the parts that are looked up. */
  render(value: unknown): unknown {
    if (typeof value !== "object" || value === null || !("object" in value)) return present(value);
    const shown = present(value) as Record<string, unknown>;
    const row = value as Kept;
    switch (row.object) {
      case "balance_transaction":
        shown.status = this.isAvailable(row as Transaction) ? "available" : "pending";
        break;
      case "dispute":
        shown.balance_transactions = (row as Dispute).balance_transactions.map((id) =>
          this.render(this.transactions.find(id)),
        );
        break;
      case "transfer":
        shown.reversals = this.listOf(
          this.reversals,
          `/v1/transfers/${row.id}/reversals`,
          (reversal) => reversal.transfer === row.id,
        );
        break;
      case "account":
        shown.external_accounts = {
          object: "list",
          has_more: false,
          url: `/v1/accounts/${row.id}/external_accounts`,
          data: present((row as Account)._banks),
        };
        break;
    }
    return shown;
  }

  private listOf<T extends Kept>(table: Table<T>, url: string, fits: (row: T) => boolean): unknown {
    const data = table.all().filter(fits).reverse().slice(0, 10).map(present);
    return { object: "list", data, has_more: false, url };
  }

  /** Lets something happen after a while; at once when the while is nothing. */
  later(kind: string, subject: string, afterMs: number): void {
    const id = `${kind}:${subject}`;
    this.timers.put(id, { id, kind, subject, dueMs: this.clock.nowMs() + afterMs });
  }

  reset(): void {
    this.documents.reset();
    this.sums.clear();
  }
}

type Sum = { available: number; pending: { net: number; atMs: number }[] };
