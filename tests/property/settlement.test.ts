import fc from "fast-check";
import { beforeAll, describe, expect, it } from "vitest";
import { inTransaction, type Db } from "@/db/client";
import { ledgerViolations, trialBalance } from "@/db/queries/ledger";
import { ledgerAccounts } from "@/db/schema";
import { accountId, type AccountId, type Posting } from "@/lib/ledger/posting";
import { adjustmentPosting, closePosting, fundPosting, releasePosting } from "@/lib/ledger/postings";
import { feeFor, payFor, quote } from "@/lib/ledger/pricing";
import {
  adjustSubmissionPay,
  closeBatchEscrow,
  fundBatch,
  releaseForSubmission,
} from "@/lib/market/money/settlement";
import { freshDb } from "@/tests/support/db";
import { credit, person, START_MS } from "@/tests/support/market";

const cents = (max: number) => fc.integer({ min: 0, max });
const work = fc.record({ agreedBoxes: cents(40), agreedPolygons: cents(40), goodFaith: fc.boolean() });

/** One submission: who, what it was found to be worth, and what a decision may make of it. */
const task = fc.record({
  who: fc.integer({ min: 0, max: 3 }),
  first: work,
  decided: fc.option(work, { nil: null }),
});

/** A batch with its rates, and as many submissions as were quoted at most. */
const batch = fc
  .record({
    baseCents: cents(500),
    boxCents: cents(500),
    polygonCents: cents(500),
    capCents: fc.integer({ min: 1, max: 5000 }),
    feeBps: cents(10_000),
    imageCount: fc.integer({ min: 1, max: 6 }),
    kMax: fc.integer({ min: 1, max: 5 }),
  })
  .chain(({ feeBps, imageCount, kMax, ...pay }) =>
    fc
      .array(task, { maxLength: imageCount * kMax })
      .map((tasks) => ({ pay, feeBps, imageCount, kMax, tasks })),
  );

type Step = { kind: "release" | "adjust"; index: number };
/** Each submission is released, then perhaps corrected; between submissions any order. */
const orderOf = (count: number, ranks: Iterator<number>): Step[] =>
  Array.from({ length: count }, (_, index): [Step, number][] => {
    const [a, b] = [ranks.next().value ?? 0, ranks.next().value ?? 0];
    return [
      [{ kind: "release", index }, Math.min(a, b)],
      [{ kind: "adjust", index }, Math.max(a, b)],
    ];
  })
    .flat()
    .sort(([, a], [, b]) => a - b)
    .map(([step]) => step);

const costOf = (
  plan: { pay: Parameters<typeof payFor>[0]; feeBps: number },
  of: Parameters<typeof payFor>[1],
) => {
  const payCents = payFor(plan.pay, of);
  return { payCents, feeCents: feeFor(payCents, plan.feeBps) };
};
const holdOf = ({
  imageCount,
  kMax,
  pay,
  feeBps,
}: {
  imageCount: number;
  kMax: number;
  pay: Parameters<typeof payFor>[0];
  feeBps: number;
}) => {
  const quoted = quote({ imageCount, kMin: 1, kMax, expectedInstances: 4, polygonShare: 0.5, pay, feeBps });
  return quoted.worstCents + quoted.worstFeeCents;
};

const wallet = accountId("wallet", "t");
const escrow = accountId("escrow", "b");

describe("a batch from quote to close", () => {
  it("bills no more than was quoted, loses no cent, and ends alike in any order of settlement (10,000 batches)", () => {
    fc.assert(
      fc.property(batch, fc.infiniteStream(fc.nat()), fc.infiniteStream(fc.nat()), (plan, one, other) => {
        const held = holdOf(plan);
        const run = (steps: Step[]) => {
          const balance = new Map<AccountId, number>([[wallet, held]]);
          const of = (id: AccountId) => balance.get(id) ?? 0;
          const book = (made: Posting) => {
            for (const entry of made) balance.set(entry.accountId, of(entry.accountId) + entry.cents);
            if (of(escrow) < 0) throw new Error("the escrow is overdrawn"); // quicker than expect, half a million times
          };
          if (held > 0) book(fundPosting("t", "b", held));
          for (const { kind, index } of steps) {
            const { who, first, decided } = plan.tasks[index]!;
            const annotatorId = `a${who}`;
            const before = costOf(plan, first);
            const payableCents = of(accountId("payable", annotatorId));
            const debtCents = -of(accountId("debt", annotatorId));
            if (kind === "release") {
              if (before.payCents > 0)
                book(releasePosting({ batchId: "b", annotatorId, ...before, debtCents }));
              continue;
            }
            const after = decided ? costOf(plan, decided) : before;
            const payDeltaCents = after.payCents - before.payCents;
            const feeDeltaCents = after.feeCents - before.feeCents;
            if (payDeltaCents === 0) continue;
            book(
              adjustmentPosting({
                batchId: "b",
                annotatorId,
                payDeltaCents,
                feeDeltaCents,
                payableCents,
                debtCents,
              }),
            );
          }
          const left = of(escrow);
          if (left > 0) book(closePosting("t", "b", left));
          return Object.fromEntries([...balance].filter(([, c]) => c !== 0).sort());
        };
        const end = run(orderOf(plan.tasks.length, one[Symbol.iterator]()));
        expect(run(orderOf(plan.tasks.length, other[Symbol.iterator]()))).toEqual(end);
        const due = plan.tasks.map(({ first, decided }) => costOf(plan, decided ?? first));
        const billed = due.reduce((sum, cost) => sum + cost.payCents + cost.feeCents, 0);
        expect(billed).toBeLessThanOrEqual(held);
        expect(end[wallet] ?? 0).toBe(held - billed);
        expect(Object.values(end).reduce((sum, c) => sum + c, 0)).toBe(held);
      }),
      { numRuns: 10_000 },
    );
  }, 120_000);
});

describe("the same batch in the stored ledger", () => {
  let db: Db;
  beforeAll(() => void (db = freshDb()));
  let count = 0;

  it("ends with the same balances in any order of settlement, and every invariant holds", () => {
    const actor = person(db, "requester");
    fc.assert(
      fc.property(batch, fc.infiniteStream(fc.nat()), fc.infiniteStream(fc.nat()), (plan, one, other) => {
        const held = Math.max(1, holdOf(plan));
        const run = (steps: Step[]) => {
          const name = `b${(count += 1)}`;
          credit(db, name, held);
          inTransaction(db, (tx) => {
            fundBatch(tx, { actor, batchId: name, teamId: name, amountCents: held, nowMs: START_MS });
            for (const { kind, index } of steps) {
              const { who, first, decided } = plan.tasks[index]!;
              const parties = {
                submissionId: `${name}-${index}`,
                batchId: name,
                annotatorId: `${name}-${who}`,
              };
              const before = costOf(plan, first);
              const after = decided ? costOf(plan, decided) : before;
              if (kind === "release") {
                if (before.payCents > 0) releaseForSubmission(tx, { ...parties, ...before, nowMs: START_MS });
              } else
                adjustSubmissionPay(tx, {
                  ...parties,
                  cause: "d",
                  oldPayCents: before.payCents,
                  oldFeeCents: before.feeCents,
                  newPayCents: after.payCents,
                  newFeeCents: after.feeCents,
                  nowMs: START_MS,
                });
            }
            closeBatchEscrow(tx, { batchId: name, teamId: name, nowMs: START_MS });
          });
          return Object.fromEntries(
            db
              .select()
              .from(ledgerAccounts)
              .all()
              .filter(({ id, balanceCents }) => id.includes(name) && balanceCents !== 0)
              .map(({ id, balanceCents }) => [id.replaceAll(name, ""), balanceCents])
              .sort(),
          );
        };
        const end = run(orderOf(plan.tasks.length, one[Symbol.iterator]()));
        expect(run(orderOf(plan.tasks.length, other[Symbol.iterator]()))).toEqual(end);
      }),
      { numRuns: 60 },
    );
    expect(ledgerViolations(db)).toEqual([]);
    expect(trialBalance(db).reduce((sum, row) => sum + row.cents, 0)).toBe(0);
  });
});
