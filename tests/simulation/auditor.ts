import { createHash } from "node:crypto";
import { sql } from "drizzle-orm";
import { openDatabase, type Db } from "@/db/client";
import { ledgerViolations } from "@/db/queries/ledger";
import { findAuditBreak } from "@/lib/market/audit";
import type { World } from "@/fakes/stripe/world";

/** What was answered with success, and so may never be lost. */
export class Acknowledged {
  /** By id: SHA-256 of the drawing as the annotator handed it in. */
  readonly submissions = new Map<string, string>();
  /** By id: the cents. */
  readonly payouts = new Map<string, number>();
  /** By claim: the version of the draft. */
  readonly drafts = new Map<string, number>();
  readonly events = new Set<string>();
  /** By team: cents that were said to be on their way to cards. */
  readonly refunds = new Map<string, number>();
}

export const sha256 = (text: string): string => createHash("sha256").update(text).digest("hex");

/** What does not hold in the file and at Stripe; with `isOver`, also what must have come to its end. */
export function audit(
  file: string,
  acknowledged: Acknowledged,
  world: World,
  { isOver = false }: { isOver?: boolean } = {},
): string[] {
  const db = openDatabase(file);
  try {
    return [
      ...ledgerViolations(db),
      ...chain(db),
      ...places(db),
      ...kept(db, acknowledged),
      ...once(db, world, isOver),
      ...(isOver ? endings(db, world) : []),
    ];
  } finally {
    db.$client.close();
  }
}

function chain(db: Db): string[] {
  const broken = findAuditBreak(db);
  return broken === null ? [] : [`the audit chain breaks at ${broken}`];
}

/** One lease a slot, one slot a person, no more slots than were wanted, work only where a claim ended in it. */
function places(db: Db): string[] {
  const slots = db.all<{ image_id: string; slot: number }>(
    sql`select image_id, slot from claims where status in ('live', 'submitted') group by image_id, slot having count(*) > 1`,
  );
  const people = db.all<{ image_id: string; annotator_id: string }>(
    sql`select image_id, annotator_id from claims where status in ('live', 'submitted') group by image_id, annotator_id having count(*) > 1`,
  );
  const crowds = db.all<{ id: string }>(
    sql`select i.id from images i where (select count(*) from claims c where c.image_id = i.id and c.status in ('live', 'submitted')) > i.slots_wanted and i.slots_wanted > 0`,
  );
  const strays = db.all<{ id: string }>(
    sql`select c.id from claims c left join submissions s on s.claim_id = c.id where (c.status = 'submitted') <> (s.id is not null)`,
  );
  return [
    ...slots.map((row) => `slot ${row.slot} of ${row.image_id} is taken twice`),
    ...people.map((row) => `${row.annotator_id} has two places on ${row.image_id}`),
    ...crowds.map((row) => `${row.id} has more people than it wants`),
    ...strays.map((row) => `claim ${row.id} and its submission do not agree`),
  ];
}

function kept(db: Db, { submissions, payouts, drafts, events, refunds }: Acknowledged): string[] {
  const rows = new Map(
    db
      .all<{ id: string; document: string; sha256: string }>(
        sql`select id, document, sha256 from submissions`,
      )
      .map((row) => [row.id, row]),
  );
  const paid = new Map(
    db
      .all<{ id: string; amount_cents: number }>(sql`select id, amount_cents from payouts`)
      .map((row) => [row.id, row.amount_cents]),
  );
  const versions = new Map(
    db
      .all<{ id: string; version: number | null }>(
        sql`select c.id, d.version from claims c left join drafts d on d.claim_id = c.id where c.status in ('live', 'expired')`,
      )
      .map((row) => [row.id, row.version ?? 0]),
  );
  const known = new Set(db.all<{ id: string }>(sql`select id from stripe_events`).map((row) => row.id));
  const sent = new Map(
    db
      .all<{ team_id: string; cents: number }>(
        sql`select team_id, sum(amount_cents) as cents from refunds group by team_id`,
      )
      .map((row) => [row.team_id, row.cents]),
  );
  return [
    ...[...submissions]
      .filter(([id, hash]) => sha256(rows.get(id)?.document ?? "") !== hash || rows.get(id)?.sha256 !== hash)
      .map(([id]) => `submission ${id} was acknowledged and is not there as it was handed in`),
    ...[...payouts]
      .filter(([id, cents]) => paid.get(id) !== cents)
      .map(([id]) => `payout ${id} was acknowledged and is lost`),
    ...[...drafts]
      .filter(([id, version]) => versions.has(id) && (versions.get(id) ?? 0) < version)
      .map(([id, version]) => `version ${version} of the draft of ${id} was acknowledged and is lost`),
    ...[...events].filter((id) => !known.has(id)).map((id) => `event ${id} was acknowledged and is lost`),
    ...[...refunds]
      .filter(([team, cents]) => (sent.get(team) ?? 0) < cents)
      .map(([team]) => `a refund of ${team} was acknowledged and is lost`),
  ];
}

function countBy<T>(rows: Iterable<T>, keyOf: (row: T) => string | undefined): Map<string, T[]> {
  const groups = new Map<string, T[]>();
  for (const row of rows) {
    const key = keyOf(row);
    if (key !== undefined) groups.set(key, [...(groups.get(key) ?? []), row]);
  }
  return groups;
}

/** Each payout is one transfer and reaches a bank once, each refund is one refund, each account is one. */
function once(db: Db, world: World, isOver: boolean): string[] {
  const wrong: string[] = [];
  const transfers = countBy(world.transfers.values(), (row) => row.metadata.payoutId);
  const banked = countBy(world.payouts.values(), (row) => row.metadata.payoutId);
  const refunded = countBy(world.refunds.values(), (row) => row.metadata?.refundId);
  const rows = db.all<{ id: string; amount_cents: number; status: string }>(
    sql`select id, amount_cents, status from payouts`,
  );
  for (const { id, amount_cents: cents, status } of rows) {
    const made = transfers.get(id) ?? [];
    const [first] = made;
    if (made.length > 1) wrong.push(`payout ${id} has ${made.length} transfers`);
    if (first && first.amount !== cents) wrong.push(`payout ${id} is ${cents}, its transfer ${first.amount}`);
    if (["sent", "paid"].includes(status) && !first)
      wrong.push(`payout ${id} is ${status} and has no transfer`);
    const arrived = (banked.get(id) ?? []).filter(
      (row) => row.status !== "failed" && row.status !== "canceled",
    );
    if (arrived.length > 1) wrong.push(`payout ${id} went to a bank ${arrived.length} times`);
    if (arrived.length > 0 && status === "failed")
      wrong.push(`payout ${id} failed here and arrived at a bank`);
    if (isOver && status === "paid" && arrived[0]?.status !== "paid")
      wrong.push(`payout ${id} is paid here and not at the bank`);
    transfers.delete(id);
  }
  for (const id of transfers.keys()) wrong.push(`a transfer belongs to payout ${id}, which is not there`);
  for (const [id, made] of refunded)
    if (made.length > 1) wrong.push(`refund ${id} was made ${made.length} times`);
  // A second account can be made when the answer to the first was lost more than a day before; it stays unused.
  for (const [user, accounts] of countBy(world.accounts.values(), (row) => row.metadata.userId)) {
    const used = accounts.filter(({ id }) =>
      [...world.transfers.values()].some((row) => row.destination === id),
    );
    if (used.length > 1) wrong.push(`${user} was paid at ${used.length} accounts`);
  }
  return wrong;
}

/** What must be finished when everybody has gone home. */
function endings(db: Db, world: World): string[] {
  const rows = (what: string, query: ReturnType<typeof sql>) =>
    db
      .all<{ id: string; detail: string | null }>(query)
      .map(({ id, detail }) => `${what} ${id}: ${detail ?? ""}`);
  const paidSessions = new Set(
    [...world.sessions.values()].filter((row) => row.payment_status === "paid").map((row) => row.id),
  );
  const unpaid = db
    .all<{ id: string; session: string | null; status: string }>(
      sql`select id, stripe_session_id as session, status from top_ups`,
    )
    .filter(
      (row) =>
        row.session !== null &&
        paidSessions.has(row.session) &&
        row.status !== "paid" &&
        row.status !== "disputed",
    )
    .map((row) => `top-up ${row.id} was paid and is ${row.status}`);
  // A reconciliation that never got through is made again the next night.
  return [
    ...unpaid,
    ...rows(
      "job not done",
      sql`select id, kind || ' ' || status || ' ' || coalesce(last_error, '') as detail from jobs where status <> 'done' and kind <> 'ledger.reconcile'`,
    ),
    ...rows(
      "event not processed",
      sql`select id, type as detail from stripe_events where processed_at_ms is null`,
    ),
    ...rows(
      "payout under way",
      sql`select id, status as detail from payouts where status not in ('paid', 'failed')`,
    ),
    ...rows("refund under way", sql`select id, status as detail from refunds where status = 'queued'`),
    ...rows(
      "batch still holds money",
      sql`select owner_id as id, balance_cents as detail from ledger_accounts where kind in ('escrow', 'transit', 'refunding') and balance_cents <> 0`,
    ),
    ...rows(
      "in suspense",
      sql`select id, balance_cents as detail from ledger_accounts where kind = 'suspense' and balance_cents <> 0`,
    ),
    ...rows(
      "unpaid work",
      sql`select id, status as detail from (select s.id, b.status from submissions s join batches b on b.id = s.batch_id where s.pay_cents is null)`,
    ),
    ...rows(
      "work without its money",
      sql`select s.id, s.pay_cents || ' + ' || s.fee_cents as detail from submissions s where s.pay_cents + s.fee_cents <> (select coalesce(sum(-e.cents), 0) from ledger_postings p join ledger_entries e on e.posting_id = p.id where p.source = 'submission' and p.source_id = s.id and (e.account_id like 'escrow:%' or e.account_id like 'wallet:%' or e.account_id = 'shortfall'))`,
    ),
  ];
}
