import { and, asc, eq, inArray, lt, sql } from "drizzle-orm";
import type { Reader } from "@/db/client";
import { ledgerAccounts, ledgerEntries, ledgerPostings, payouts } from "@/db/schema";
import { NEVER_NEGATIVE, NEVER_POSITIVE, type AccountId } from "@/lib/ledger/posting";
import { digestOf } from "./ledgerDigest";

type Check = (db: Reader) => string[];

const sumsToZero: Check = (db) => {
  const unbalanced = db.all<{ posting_id: string; sum: number }>(
    sql`select posting_id, sum(cents) as sum from ${ledgerEntries} group by posting_id having sum(cents) <> 0`,
  );
  return unbalanced.map((row) => `posting ${row.posting_id} sums to ${row.sum}`);
};

const trialBalanceIsZero: Check = (db) => {
  const total =
    db.get<{ sum: number | null }>(sql`select sum(balance_cents) as sum from ${ledgerAccounts}`)?.sum ?? 0;
  return total === 0 ? [] : [`the trial balance is ${total}, not zero`];
};

/** The triggers are there, and what they protect still has the digest it was written with. */
const isAppendOnly: Check = (db) => {
  const wanted = ["ledger_postings", "ledger_entries"].flatMap((table) => [
    `${table}_no_update`,
    `${table}_no_delete`,
  ]);
  const found = new Set(
    db
      .all<{ name: string }>(sql`select name from sqlite_master where type = 'trigger'`)
      .map((row) => row.name),
  );
  const rows = db
    .select({
      id: ledgerPostings.id,
      digest: ledgerPostings.digest,
      accountId: ledgerEntries.accountId,
      cents: ledgerEntries.cents,
    })
    .from(ledgerPostings)
    .leftJoin(ledgerEntries, eq(ledgerEntries.postingId, ledgerPostings.id))
    .orderBy(asc(ledgerPostings.id), asc(ledgerEntries.id))
    .all();
  const postings = new Map<string, { digest: string; entries: { accountId: AccountId; cents: number }[] }>();
  for (const { id, digest, accountId, cents } of rows) {
    const kept = postings.get(id) ?? { digest, entries: [] };
    if (accountId !== null && cents !== null) kept.entries.push({ accountId: accountId as AccountId, cents });
    postings.set(id, kept);
  }
  return [
    ...wanted.filter((name) => !found.has(name)).map((name) => `the trigger ${name} is missing`),
    ...[...postings]
      .filter(([, { digest, entries }]) => digestOf(entries) !== digest)
      .map(([id]) => `posting ${id} does not have the entries it was written with`),
  ];
};

const balancesEqualEntries: Check = (db) => {
  const drifted = db.all<{ id: string; balance_cents: number; total: number }>(
    sql`select a.id, a.balance_cents, coalesce((select sum(e.cents) from ledger_entries e where e.account_id = a.id), 0) as total from ${ledgerAccounts} a where a.balance_cents <> total`,
  );
  const jumped = db.all<{ id: number; account_id: string }>(
    sql`select id, account_id from (select id, account_id, balance_cents, sum(cents) over (partition by account_id order by id) as running from ledger_entries) where running <> balance_cents`,
  );
  return [
    ...drifted.map((row) => `account ${row.id} says ${row.balance_cents}, its entries ${row.total}`),
    ...jumped.map((row) => `entry ${row.id} of ${row.account_id} carries a wrong balance`),
  ];
};

/** Negative at no moment, not only now: each entry carries the balance after it. */
const neverBelowZero: Check = (db) => {
  const negative = db
    .select({ id: ledgerAccounts.id, cents: ledgerAccounts.balanceCents })
    .from(ledgerAccounts)
    .where(and(inArray(ledgerAccounts.kind, [...NEVER_NEGATIVE]), lt(ledgerAccounts.balanceCents, 0)))
    .all();
  const wasNegative = db
    .selectDistinct({ id: ledgerAccounts.id })
    .from(ledgerEntries)
    .innerJoin(ledgerAccounts, eq(ledgerAccounts.id, ledgerEntries.accountId))
    .where(and(inArray(ledgerAccounts.kind, [...NEVER_NEGATIVE]), lt(ledgerEntries.balanceCents, 0)))
    .all();
  const positive = db
    .select({ id: ledgerAccounts.id, cents: ledgerAccounts.balanceCents })
    .from(ledgerAccounts)
    .where(and(inArray(ledgerAccounts.kind, [...NEVER_POSITIVE]), sql`${ledgerAccounts.balanceCents} > 0`))
    .all();
  return [
    ...negative.map((row) => `account ${row.id} is negative: ${row.cents}`),
    ...wasNegative.map((row) => `account ${row.id} was negative`),
    ...positive.map((row) => `account ${row.id} owes a negative debt: ${row.cents}`),
  ];
};

/** An open batch's escrow is what was funded less the pay and fee of its submissions; a closed one's is zero. */
const escrowAddsUp: Check = (db) =>
  db
    .all<{ id: string; status: string; balance: number; expected: number }>(
      sql`select b.id, b.status, a.balance_cents as balance,
        case b.status when 'closed' then 0 else
          coalesce((select sum(e.cents) from ledger_entries e join ledger_postings p on p.id = e.posting_id where e.account_id = a.id and p.kind = 'fund'), 0)
          - coalesce((select sum(coalesce(s.pay_cents, 0) + coalesce(s.fee_cents, 0)) from submissions s where s.batch_id = b.id), 0)
        end as expected
      from batches b join ledger_accounts a on a.id = 'escrow:' || b.id where balance <> expected`,
    )
    .map((row) => `escrow of ${row.status} batch ${row.id} holds ${row.balance}, not ${row.expected}`);

/** A card payment gives back no more than it brought, and what it gave back is the sum of its refunds. */
const refundsFitPayments: Check = (db) =>
  db
    .all<{ id: string }>(
      sql`select t.id from top_ups t where t.refunded_cents > t.amount_cents
        or t.refunded_cents <> coalesce((select sum(r.amount_cents) from refunds r where r.top_up_id = t.id and r.status <> 'failed'), 0)`,
    )
    .map((row) => `top-up ${row.id} and its refunds do not agree`);

/** What a posting links to is there, and what was begun is resolved at most once. */
const linksHold: Check = (db) => {
  const lost = db.all<{ id: string }>(
    sql`select p.id from ledger_postings p where p.linked_to is not null and not exists (select 1 from ledger_postings q where q.id = p.linked_to)`,
  );
  const twice = db.all<{ linked_to: string; times: number }>(
    sql`select linked_to, count(*) as times from ledger_postings where linked_to is not null and kind in ('transfer', 'refund', 'void', 'suspense-cleared') group by linked_to having count(*) > 1`,
  );
  return [
    ...lost.map((row) => `posting ${row.id} is linked to one that is not there`),
    ...twice.map((row) => `posting ${row.linked_to} was resolved ${row.times} times`),
  ];
};

/** A cause posts once: the index that holds it is there, and no index can be fooled after the fact. */
const causesAreUnique: Check = (db) => {
  const index = db.get<{ name: string }>(
    sql`select name from sqlite_master where type = 'index' and name = 'ledger_postings_cause' and sql like 'CREATE UNIQUE%'`,
  );
  const twice = db.all<{ source: string; source_id: string; kind: string }>(
    sql`select source, source_id, kind from ledger_postings group by source, source_id, kind having count(*) > 1`,
  );
  return [
    ...(index ? [] : ["the unique index of causes is missing"]),
    ...twice.map((row) => `${row.kind} of ${row.source} ${row.source_id} was posted twice`),
  ];
};

/** What moved for a submission, its pay and its fee, is what its row says, whoever paid it. */
const submissionsAddUp: Check = (db) =>
  db
    .all<{ id: string; pay: number; fee: number; paid: number; charged: number }>(
      sql`select s.id, coalesce(s.pay_cents, 0) as pay, coalesce(s.fee_cents, 0) as fee,
        coalesce(sum(case when a.kind in ('payable', 'debt') then e.cents end), 0) as paid,
        coalesce(sum(case when a.kind = 'fee' then e.cents end), 0) as charged
      from submissions s
      left join ledger_postings p on p.source = 'submission' and p.source_id = s.id
      left join ledger_entries e on e.posting_id = p.id
      left join ledger_accounts a on a.id = e.account_id
      group by s.id having paid <> pay or charged <> fee`,
    )
    .map(
      (row) =>
        `submission ${row.id} earns ${row.pay} + ${row.fee}, its postings ${row.paid} + ${row.charged}`,
    );

/**
 * What takes a posting back mirrors all of it: same accounts, opposite cents. What moved from pending to available
 * in between is part of it; what moves afterwards belongs to the posting that took its place.
 */
const mirrorsMirror: Check = (db) =>
  db
    .all<{ id: string; linked_to: string }>(
      sql`select p.id, p.linked_to from ledger_postings p where p.kind in ('void', 'suspense-cleared') and exists (
        select 1 from (
          select account_id, cents from ledger_entries where posting_id in (p.id, p.linked_to)
          union all
          select e.account_id, e.cents from ledger_postings m join ledger_entries e on e.posting_id = m.id
            where m.source = p.source and m.source_id = p.source_id and m.kind = 'available' and m.rowid < p.rowid
        ) group by account_id having sum(cents) <> 0)`,
    )
    .map((row) => `posting ${row.id} does not take back all of ${row.linked_to}`);

/** A balance transaction of Stripe's stands in one posting, and what lies in suspense is known to a person. */
const stripeStandsOnce: Check = (db) => {
  const twice = db.all<{ source_id: string; kinds: string }>(
    sql`select source_id, group_concat(kind) as kinds from ledger_postings p
      where source = 'stripe' and source_id like 'txn%' and kind not in ('available', 'suspense-cleared')
        and not (kind = 'suspense' and exists (select 1 from ledger_postings c where c.linked_to = p.id and c.kind = 'suspense-cleared'))
      group by source_id having count(*) > 1`,
  );
  const silent = db.all<{ source_id: string }>(
    sql`select source_id from ledger_postings p where kind = 'suspense' and not exists (select 1 from ledger_alerts where what in ('suspense', 'unknown payment'))`,
  );
  return [
    ...twice.map((row) => `${row.source_id} stands as ${row.kinds}`),
    ...silent.map((row) => `${row.source_id} lies in suspense and nobody was told`),
  ];
};

/** What is on its way is what the rows of payouts and refunds say is on its way. */
const underWayAddsUp: Check = (db) =>
  db
    .all<{ id: string; balance: number; expected: number }>(
      sql`select a.id, a.balance_cents as balance,
        case a.kind
          when 'transit' then coalesce((select sum(amount_cents) from payouts where annotator_id = a.owner_id and status = 'queued'), 0)
          else coalesce((select sum(amount_cents) from refunds where team_id = a.owner_id and status = 'queued'), 0)
        end as expected
      from ledger_accounts a where a.kind in ('transit', 'refunding') and balance <> expected`,
    )
    .map((row) => `${row.id} holds ${row.balance}, its rows say ${row.expected}`);

/**
 * Each payout left once at most; what came back of it is no more than what left, and all of it when it failed.
 */
const payoutsAreWhole: Check = (db) => {
  const moved = db.all<{ id: string; kind: string; cents: number }>(
    sql`select s.source_id as id, p.kind, sum(case when e.account_id = 'stripe' or e.account_id = 'stripe:pending' or p.kind = 'void' then abs(e.cents) else 0 end) as cents
      from ledger_postings s join ledger_postings p on p.linked_to = s.id join ledger_entries e on e.posting_id = p.id
      where s.source = 'payout' and s.kind = 'start' and p.kind in ('transfer', 'transfer-back', 'void') group by s.source_id, p.kind`,
  );
  const of = (id: string, kind: string) => {
    const cents = moved.find((row) => row.id === id && row.kind === kind)?.cents ?? 0;
    return kind === "void" ? cents / 2 : cents; // both of its entries are counted
  };
  const { id, status, amountCents } = payouts;
  return db
    .select({ id, status, amountCents })
    .from(payouts)
    .all()
    .flatMap((row) => {
      const [sent, back, voided] = [of(row.id, "transfer"), of(row.id, "transfer-back"), of(row.id, "void")];
      const isWhole = {
        queued: sent === 0 && voided === 0 && back === 0,
        sent: sent === row.amountCents && back < row.amountCents && voided === 0,
        paid: sent === row.amountCents && back < row.amountCents && voided === 0,
        failed:
          (voided === row.amountCents && sent === 0) ||
          (sent === row.amountCents && back === row.amountCents),
      }[row.status];
      return isWhole ? [] : [`payout ${row.id} is ${row.status}: sent ${sent}, back ${back}, void ${voided}`];
    });
};

/** A card dispute that is over holds nothing. */
const closedHoldsAreEmpty: Check = (db) =>
  db
    .all<{ id: string; balance: number }>(
      sql`select a.id, a.balance_cents as balance from ledger_accounts a join ledger_postings p on p.source = 'stripe' and p.source_id = a.owner_id and p.kind = 'dispute-closed' where a.kind = 'hold' and a.balance_cents <> 0`,
    )
    .map((row) => `${row.id} is closed and holds ${row.balance}`);

/** By the invariant that each holds; the numbers are those of DEVELOPERS.md. */
const CHECKS: readonly Check[] = [
  sumsToZero, // 1
  isAppendOnly, // 2
  balancesEqualEntries, // 3
  neverBelowZero, // 4
  causesAreUnique, // 5
  escrowAddsUp, // 6, 8
  submissionsAddUp, // 7
  refundsFitPayments, // 8
  linksHold, // 9
  mirrorsMirror, // 9
  payoutsAreWhole, // 10, 12
  underWayAddsUp, // 12
  closedHoldsAreEmpty, // 11
  stripeStandsOnce, // 13, with the reconciliation
  trialBalanceIsZero, // 1
];

/**
 * What in the ledger does not hold; empty when all does. Reads the whole ledger: O(entries). Whether the ledger
 * agrees with Stripe is the reconciliation's to say.
 */
export function ledgerViolations(db: Reader): string[] {
  return CHECKS.flatMap((check) => check(db));
}
