import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { InvariantError } from "@/lib/errors";
import { periodOf, statementOf } from "@/lib/ledger/statement";

const entry = (kind: string, cents: number, atMs = 0) => ({ atMs, kind, memo: kind, cents });

describe("a statement", () => {
  it("carries the balance from line to line and the sum of each kind", () => {
    const { lines, totals, openingCents, closingCents } = statementOf(
      100,
      [entry("release", 30), entry("start", -120), entry("release", 15)],
      25,
    );
    expect(lines.map((line) => line.balanceCents)).toEqual([130, 10, 25]);
    expect(Object.fromEntries(totals)).toEqual({ release: 45, start: -120 });
    expect([openingCents, closingCents]).toEqual([100, 25]);
  });

  it("that does not end where the account does is a bug, and so is part of a cent", () => {
    expect(() => statementOf(0, [entry("release", 1)], 2)).toThrow(InvariantError);
    expect(() => statementOf(0, [entry("release", 0.5)], 0.5)).toThrow(InvariantError);
    expect(() => statementOf(Number.NaN, [], 0)).toThrow(InvariantError);
  });

  it("adds up over any history: the totals are closing less opening", () => {
    const cents = fc.integer({ min: -10_000, max: 10_000 });
    const entries = fc.array(fc.tuple(fc.constantFrom("a", "b", "c"), cents));
    fc.assert(
      fc.property(cents, entries, (opening, list) => {
        const sum = list.reduce((all, [, moved]) => all + moved, 0);
        const made = statementOf(
          opening,
          list.map(([kind, moved]) => entry(kind, moved)),
          opening + sum,
        );
        expect([...made.totals.values()].reduce((all, moved) => all + moved, 0)).toBe(sum);
        expect(made.lines.at(-1)?.balanceCents ?? opening).toBe(made.closingCents);
      }),
    );
  });
});

describe("a period", () => {
  it("is a month or a year in UTC, each beginning where the one before ends", () => {
    expect(periodOf(2026, 2)).toEqual({ fromMs: Date.UTC(2026, 1, 1), toMs: Date.UTC(2026, 2, 1) });
    expect(periodOf(2026, 12).toMs).toBe(periodOf(2027, 1).fromMs);
    expect(periodOf(2026)).toEqual({ fromMs: periodOf(2026, 1).fromMs, toMs: periodOf(2027).fromMs });
  });

  it.each([
    [1999, 1],
    [10_000, 1],
    [2026.5, 1],
    [2026, 0],
    [2026, 13],
    [2026, 1.5],
  ])("%d-%d does not exist", (year, month) => {
    expect(() => periodOf(year, month)).toThrow(RangeError);
  });
});
