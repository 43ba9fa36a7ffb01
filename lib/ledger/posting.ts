import { InvariantError } from "@/lib/errors";
import { requireCents } from "./amounts";

/**
 * Kinds of account. Positive cents are what the account holds for its owner; `stripe` is the world outside,
 * so its balance is minus what Stripe keeps for the platform: `stripe` what is available there, and
 * `stripe:pending` what is not yet. `refunding` and `transit` hold money whose way out has begun and is not
 * yet confirmed. A `hold` (one for each card dispute) may have either sign and ends at zero. Debts and costs
 * are negative.
 */
export const ACCOUNT_KINDS = [
  "stripe",
  "wallet",
  "refunding",
  "escrow",
  "payable",
  "transit",
  "debt",
  "fee",
  "processing",
  "hold",
  "loss",
  "shortfall",
  "suspense",
] as const;

export type AccountKind = (typeof ACCOUNT_KINDS)[number];

export type AccountId = string & { readonly __account: unique symbol };

/** The id of an account: `kind` for the platform's own, `kind:owner` for a team's, batch's or annotator's. */
export function accountId(kind: AccountKind, ownerId?: string): AccountId {
  return (ownerId === undefined ? kind : `${kind}:${ownerId}`) as AccountId;
}

export function kindOf(id: AccountId): AccountKind {
  return id.split(":", 1)[0] as AccountKind;
}

/** Accounts whose balance may never be negative: nobody can spend what is not there. */
export const NEVER_NEGATIVE: readonly AccountKind[] = ["wallet", "refunding", "escrow", "payable", "transit"];
/** Accounts whose balance may never be positive: what is owed to the platform, and what it has spent. */
export const NEVER_POSITIVE: readonly AccountKind[] = ["debt", "shortfall"];

export type Entry = { accountId: AccountId; cents: number };

declare const checked: unique symbol;
/** Entries that are whole cents, not zero, one for each account, and sum to zero. Sorted by account. */
export type Posting = readonly Entry[] & { readonly [checked]: true };

/** Makes a posting of entries. Throws InvariantError unless they are whole cents that sum to zero. */
export function posting(entries: readonly Entry[]): Posting {
  const byAccount = new Map<AccountId, number>();
  for (const { accountId: id, cents } of entries) {
    byAccount.set(id, (byAccount.get(id) ?? 0) + requireCents(cents, `the entry of ${id}`));
  }
  const merged = [...byAccount]
    .filter(([, cents]) => cents !== 0)
    .map(([id, cents]) => ({ accountId: id, cents }))
    .sort((a, b) => (a.accountId < b.accountId ? -1 : 1));
  const sum = merged.reduce((total, entry) => total + entry.cents, 0);
  if (sum !== 0) throw new InvariantError(`a posting sums to ${sum}, not to zero`);
  if (merged.length === 0) throw new InvariantError("a posting moves something");
  return merged as unknown as Posting;
}

/** The mirror of a posting: it takes back exactly what the posting did. */
export function reversal(original: Posting): Posting {
  return posting(original.map(({ accountId: id, cents }) => ({ accountId: id, cents: -cents })));
}
