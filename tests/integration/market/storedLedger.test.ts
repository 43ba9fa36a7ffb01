import { eq, sql } from "drizzle-orm";
import { beforeEach, describe, expect, it } from "vitest";
import { inTransaction, type Db } from "@/db/client";
import {
  balanceOf,
  findPosting,
  insertPosting,
  ledgerViolations,
  listMovements,
  trialBalance,
} from "@/db/queries/ledger";
import { ledgerAccounts, ledgerEntries, ledgerPostings } from "@/db/schema";
import { accountId, type Posting } from "@/lib/ledger/posting";
import {
  closePosting,
  fundPosting,
  releasePosting,
  suspensePosting,
  topUpPosting,
} from "@/lib/ledger/postings";
import { freshDb } from "@/tests/support/db";
import { openMarket, refusalOf, settledImage, START_MS } from "@/tests/support/market";

let db: Db;
beforeEach(() => {
  db = freshDb();
});

const write = (sourceId: string, posting: Posting, kind = "test") =>
  inTransaction(db, (tx) =>
    insertPosting(tx, { source: "test", sourceId, kind, posting, memo: "A test", nowMs: START_MS }),
  );
const wallet = () => balanceOf(db, accountId("wallet", "t"));
const rows = () => db.select().from(ledgerEntries).all().length;

describe("the stored ledger", () => {
  it("keeps balances that equal the sums of their entries, each with the balance after it", () => {
    write("a", topUpPosting("t", 500));
    write("b", fundPosting("t", "b", 200));
    write("c", releasePosting({ batchId: "b", annotatorId: "x", payCents: 100, feeCents: 15 }));
    expect(Object.fromEntries(trialBalance(db).map((row) => [row.kind, row.cents]))).toEqual({
      stripe: -500,
      wallet: 300,
      escrow: 85,
      payable: 100,
      fee: 15,
    });
    expect(listMovements(db, accountId("escrow", "b"), { limit: 9 }).map((row) => row.balanceCents)).toEqual([
      85, 200,
    ]);
    expect(ledgerViolations(db)).toEqual([]);
  });

  it("posts once for a cause: a replay moves nothing and gives the first posting", () => {
    const first = write("a", topUpPosting("t", 500));
    expect(write("a", topUpPosting("t", 500)).id).toBe(first.id);
    expect([wallet(), rows()]).toEqual([500, 2]);
  });

  it("refuses a replay with another amount, and changes nothing", () => {
    write("a", topUpPosting("t", 500));
    expect(refusalOf(() => write("a", topUpPosting("t", 501)))).toBe("conflict");
    expect([wallet(), rows()]).toEqual([500, 2]);
  });

  it("tells causes apart by kind", () => {
    write("a", topUpPosting("t", 500), "one");
    write("a", topUpPosting("t", 500), "two");
    expect(wallet()).toBe(1000);
    expect(findPosting(db, { source: "test", sourceId: "a", kind: "three" })).toBeUndefined();
  });

  it("refuses what an account does not hold, and leaves no row of it", () => {
    write("a", topUpPosting("t", 500));
    expect(refusalOf(() => write("b", fundPosting("t", "b", 501)))).toBe("conflict");
    expect([wallet(), rows()]).toEqual([500, 2]);
    expect(findPosting(db, { source: "test", sourceId: "b", kind: "test" })).toBeUndefined();
    expect(db.select().from(ledgerAccounts).where(eq(ledgerAccounts.id, "escrow:b")).get()).toBeUndefined();
    write("b", fundPosting("t", "b", 500)); // to the last cent
    expect(wallet()).toBe(0);
  });

  it.each([
    ["changed posting", () => db.update(ledgerPostings).set({ memo: "Another" }).run()],
    ["removed posting", () => db.delete(ledgerPostings).run()],
    ["changed entry", () => db.update(ledgerEntries).set({ cents: 1 }).run()],
    ["removed entry", () => db.delete(ledgerEntries).run()],
    [
      "replaced entry",
      () => db.run(sql`insert or replace into ledger_entries select * from ledger_entries limit 1`),
    ],
  ])("is append-only: the database refuses a %s", (_what, attempt) => {
    write("a", topUpPosting("t", 500));
    expect(attempt).toThrow();
    expect(ledgerViolations(db)).toEqual([]);
    expect(rows()).toBe(2);
  });
});

describe("the check of the ledger", () => {
  beforeEach(() => void write("a", topUpPosting("t", 500)));

  it("finds a balance that drifted from its entries", () => {
    db.update(ledgerAccounts).set({ balanceCents: 400 }).where(eq(ledgerAccounts.id, "wallet:t")).run();
    expect(ledgerViolations(db)).toEqual([
      "account wallet:t says 400, its entries 500",
      "the trial balance is -100, not zero",
    ]);
  });

  it("finds an entry without its counterpart", () => {
    const posting = findPosting(db, { source: "test", sourceId: "a", kind: "test" });
    const lone = { postingId: posting?.id ?? "", accountId: "wallet:t", cents: 7, balanceCents: 507 };
    db.insert(ledgerEntries)
      .values({ ...lone, postedAtMs: START_MS })
      .run();
    expect(ledgerViolations(db).join("\n")).toMatch(/sums to 7/);
  });

  it("finds a wallet below zero, a debt above it and a link into nothing", () => {
    db.insert(ledgerAccounts)
      .values({ id: "wallet:u", kind: "wallet", balanceCents: -5, createdAtMs: 0 })
      .run();
    db.insert(ledgerAccounts).values({ id: "debt:x", kind: "debt", balanceCents: 5, createdAtMs: 0 }).run();
    inTransaction(db, (tx) =>
      insertPosting(tx, {
        source: "test",
        sourceId: "linked",
        kind: "test",
        posting: topUpPosting("t", 1),
        memo: "",
        nowMs: 0,
        linkedTo: "pst_none",
      }),
    );
    const found = ledgerViolations(db).join("\n");
    expect(found).toMatch(/wallet:u is negative/);
    expect(found).toMatch(/debt:x owes a negative debt/);
    expect(found).toMatch(/linked to one that is not there/);
  });

  it("finds a cause that could post twice, and one that did", () => {
    db.run(sql`drop index ledger_postings_cause`);
    write("a", topUpPosting("t", 500));
    db.run(
      sql`insert into ledger_postings select 'pst_again', source, source_id, kind, digest, linked_to, memo, posted_at_ms from ledger_postings`,
    );
    const found = ledgerViolations(db).join("\n");
    expect(found).toMatch(/unique index of causes is missing/);
    expect(found).toMatch(/test of test a was posted twice/);
  });

  it("finds work whose pay is not what moved for it", () => {
    const market = openMarket(db);
    const [id = ""] = settledImage(market);
    expect(ledgerViolations(db)).toEqual([]);
    db.run(sql`update submissions set pay_cents = pay_cents + 1, fee_cents = fee_cents - 1 where id = ${id}`);
    expect(ledgerViolations(db).join("\n")).toMatch(new RegExp(`submission ${id} earns`));
  });

  it("finds a void that takes back less than was begun", () => {
    const start = write("b", fundPosting("t", "b", 200));
    const back = {
      source: "test",
      sourceId: "c",
      kind: "void",
      memo: "",
      nowMs: START_MS,
      linkedTo: start.id,
    };
    inTransaction(db, (tx) => insertPosting(tx, { ...back, posting: closePosting("t", "b", 150) }));
    expect(ledgerViolations(db).join("\n")).toMatch(/does not take back all of/);
  });

  it("finds money of Stripe's that stands twice, and suspense of which nobody was told", () => {
    for (const kind of ["topup", "suspense"])
      inTransaction(db, (tx) =>
        insertPosting(tx, {
          source: "stripe",
          sourceId: "txn_1",
          kind,
          posting: kind === "topup" ? topUpPosting("t", 10) : suspensePosting(10),
          memo: "",
          nowMs: START_MS,
        }),
      );
    const found = ledgerViolations(db).join("\n");
    expect(found).toMatch(/txn_1 stands as/);
    expect(found).toMatch(/txn_1 lies in suspense and nobody was told/);
  });
});
