import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { splitCents } from "@/lib/ledger/amounts";
import { posting, reversal, type AccountKind, accountId } from "@/lib/ledger/posting";
import {
  adjustmentPosting,
  disputeClosedPosting,
  disputeMovePosting,
  freezePosting,
  releasePosting,
} from "@/lib/ledger/postings";
import { feeFor, payFor, quote } from "@/lib/ledger/pricing";

const cents = (max: number) => fc.integer({ min: 0, max });
const sumOf = (entries: readonly { cents: number }[]) => entries.reduce((sum, entry) => sum + entry.cents, 0);

const rates = fc
  .record({ baseCents: cents(10_000), boxCents: cents(10_000), polygonCents: cents(10_000) })
  .chain((pay) => cents(100_000).map((capCents) => ({ ...pay, capCents: Math.max(1, capCents) })));

/** A batch and what its annotators turn out to draw: any number of tasks up to what was quoted. */
const batch = fc
  .record({
    pay: rates,
    feeBps: cents(10_000),
    imageCount: fc.integer({ min: 0, max: 12 }),
    ks: fc.tuple(fc.integer({ min: 1, max: 9 }), fc.integer({ min: 1, max: 9 })),
    expectedInstances: fc.double({ min: 0.1, max: 500, noNaN: true }),
    polygonShare: fc.double({ min: 0, max: 1, noNaN: true }),
  })
  .chain((plan) => {
    const [kMin, kMax] = [Math.min(...plan.ks), Math.max(...plan.ks)];
    const task = fc.record({ agreedBoxes: cents(60), agreedPolygons: cents(60), goodFaith: fc.boolean() });
    const tasks = fc.array(task, { maxLength: plan.imageCount * kMax });
    return tasks.map((done) => ({ ...plan, kMin, kMax, done }));
  });

describe("over 10,000 random batches", () => {
  it("the bill never exceeds what was quoted and held, nor does the expected cost", () => {
    fc.assert(
      fc.property(batch, ({ done, ...plan }) => {
        const quoted = quote(plan);
        const bill = done.reduce((sum, task) => {
          const pay = payFor(plan.pay, task);
          return sum + pay + feeFor(pay, plan.feeBps);
        }, 0);
        const held = quoted.worstCents + quoted.worstFeeCents;
        expect(bill).toBeLessThanOrEqual(held);
        expect(quoted.expectedCents).toBeLessThanOrEqual(quoted.worstCents);
        expect(quoted.expectedFeeCents).toBeLessThanOrEqual(quoted.worstFeeCents);
      }),
      { numRuns: 10_000 },
    );
  });

  it("pay grows with what is agreed and is never above the cap", () => {
    fc.assert(
      fc.property(rates, cents(60), cents(60), (pay, agreedBoxes, agreedPolygons) => {
        const less = payFor(pay, { agreedBoxes, agreedPolygons, goodFaith: true });
        const more = payFor(pay, { agreedBoxes: agreedBoxes + 1, agreedPolygons, goodFaith: true });
        expect(less).toBeLessThanOrEqual(more);
        expect(more).toBeLessThanOrEqual(pay.capCents);
      }),
      { numRuns: 10_000 },
    );
  });
});

describe("a split of any amount", () => {
  const weights = fc
    .uniqueArray(fc.tuple(fc.stringMatching(/^[a-z]{1,6}$/), fc.integer({ min: 0, max: 1_000_000 })), {
      selector: ([key]) => key,
      minLength: 1,
      maxLength: 30,
    })
    .filter((list) => list.some(([, weight]) => weight > 0));

  it("sums exactly to it, each share within a cent of its due", () => {
    fc.assert(
      fc.property(cents(1_000_000_000), weights, (total, list) => {
        const shares = splitCents(total, new Map(list));
        const sum = list.reduce((all, [, weight]) => all + weight, 0);
        expect([...shares.values()].reduce((all, share) => all + share, 0)).toBe(total);
        for (const [key, weight] of list)
          expect(Math.abs((shares.get(key) ?? 0) - (total * weight) / sum)).toBeLessThan(1);
      }),
      { numRuns: 5000 },
    );
  });

  it("does not depend on the order in which the shares are named", () => {
    fc.assert(
      fc.property(cents(1_000_000), weights, fc.infiniteStream(fc.nat()), (total, list, order) => {
        const ranks = new Map(list.map(([key]) => [key, order.next().value ?? 0]));
        const shuffled = [...list].sort(([a], [b]) => (ranks.get(a) ?? 0) - (ranks.get(b) ?? 0));
        const plain = Object.fromEntries(splitCents(total, new Map(list)));
        expect(Object.fromEntries(splitCents(total, new Map(shuffled)))).toEqual(plain);
      }),
      { numRuns: 2000 },
    );
  });
});

describe("every posting", () => {
  it("of a release sums to zero", () => {
    fc.assert(
      fc.property(fc.integer({ min: 1, max: 100_000 }), cents(100_000), (payCents, feeCents) => {
        const made = releasePosting({ batchId: "b", annotatorId: "a", payCents, feeCents });
        expect(sumOf(made)).toBe(0);
        expect(sumOf(reversal(made))).toBe(0);
      }),
    );
  });

  it("of a card dispute sums to zero, and won or lost its hold ends at zero without a negative wallet", () => {
    const amounts = fc.record({
      amount: fc.integer({ min: 1, max: 1_000_000 }),
      wallet: cents(1_000_000),
      fee: cents(2000),
      isWon: fc.boolean(),
    });
    fc.assert(
      fc.property(amounts, ({ amount, wallet, fee, isWon }) => {
        const balance = new Map<string, number>([["wallet:t", wallet]]);
        const of = (id: string) => balance.get(id) ?? 0;
        const book = (made: readonly { accountId: string; cents: number }[]) => {
          expect(sumOf(made)).toBe(0);
          for (const entry of made) balance.set(entry.accountId, of(entry.accountId) + entry.cents);
          expect(of("wallet:t")).toBeGreaterThanOrEqual(0);
        };
        const frozen = Math.min(wallet, amount);
        if (frozen > 0) book(freezePosting("t", "d", frozen));
        book(disputeMovePosting({ disputeId: "d", amountCents: -amount, feeCents: fee }));
        if (isWon) book(disputeMovePosting({ disputeId: "d", amountCents: amount, feeCents: 0 }));
        if (of("hold:d") !== 0) book(disputeClosedPosting("t", "d", of("hold:d")));
        expect(of("hold:d")).toBe(0);
        expect(of("wallet:t")).toBe(isWon ? wallet : wallet - frozen);
        expect(of("loss")).toBe(isWon ? 0 : frozen - amount || 0);
      }),
      { numRuns: 2000 },
    );
  });

  it("of any entries sums to zero or is refused", () => {
    const kind = fc.constantFrom<AccountKind>("stripe", "wallet", "escrow", "payable", "fee");
    const entry = fc.record({
      accountId: fc.tuple(kind, fc.constantFrom("x", "y")).map(([k, owner]) => accountId(k, owner)),
      cents: fc.integer({ min: -3, max: 3 }),
    });
    fc.assert(
      fc.property(fc.array(entry, { maxLength: 6 }), (entries) => {
        const sum = sumOf(entries);
        const isNothing = () => [...moved.values()].every((c) => c === 0);
        const moved = new Map<string, number>();
        for (const { accountId: id, cents: c } of entries) moved.set(id, (moved.get(id) ?? 0) + c);
        if (sum !== 0 || isNothing()) {
          expect(() => posting(entries)).toThrow();
          return;
        }
        const made = posting(entries);
        expect(sumOf(made)).toBe(0);
        expect(new Set(made.map((e) => e.accountId)).size).toBe(made.length);
      }),
      { numRuns: 2000 },
    );
  });
});

describe("any history of corrections", () => {
  it("never makes the payable negative or the debt a credit, and loses no cent", () => {
    const delta = fc.record({ pay: fc.integer({ min: -500, max: 500 }), paidOut: fc.boolean() });
    fc.assert(
      fc.property(fc.array(delta, { maxLength: 25 }), (deltas) => {
        const balance = new Map<string, number>();
        const of = (kind: AccountKind) => balance.get(accountId(kind, "a")) ?? 0;
        let due = 0;
        let paidOut = 0;
        for (const { pay, paidOut: isPaidOut } of deltas) {
          if (isPaidOut) {
            paidOut += of("payable");
            balance.set(accountId("payable", "a"), 0);
          }
          if (pay === 0) continue;
          due += pay;
          const made = adjustmentPosting({
            batchId: "b",
            annotatorId: "a",
            payDeltaCents: pay,
            feeDeltaCents: Math.trunc(pay / 10),
            payableCents: of("payable"),
            debtCents: -of("debt"),
          });
          expect(sumOf(made)).toBe(0);
          for (const entry of made)
            balance.set(entry.accountId, (balance.get(entry.accountId) ?? 0) + entry.cents);
          expect(of("payable")).toBeGreaterThanOrEqual(0);
          expect(of("debt")).toBeLessThanOrEqual(0);
        }
        expect(of("payable") + of("debt") + paidOut).toBe(due);
      }),
      { numRuns: 3000 },
    );
  });
});
