import { describe, expect, it } from "vitest";
import { InvariantError } from "@/lib/errors";
import { accountId, kindOf, posting, reversal } from "@/lib/ledger/posting";

const wallet = accountId("wallet", "tem_1");
const escrow = accountId("escrow", "bat_1");
const stripe = accountId("stripe");

describe("an account", () => {
  it("says its kind, with an owner and without", () => {
    expect([kindOf(wallet), kindOf(stripe)]).toEqual(["wallet", "stripe"]);
    expect(wallet).toBe("wallet:tem_1");
  });
});

describe("a posting", () => {
  it("is sorted by account, so that the same movement always has the same digest", () => {
    const entries = [
      { accountId: wallet, cents: -5 },
      { accountId: escrow, cents: 5 },
    ];
    expect(posting(entries)).toEqual(posting([...entries].reverse()));
    expect(posting(entries).map((entry) => entry.accountId)).toEqual([escrow, wallet]);
  });

  it("has one entry for an account and none that moves nothing", () => {
    const made = posting([
      { accountId: wallet, cents: -7 },
      { accountId: escrow, cents: 4 },
      { accountId: escrow, cents: 3 },
      { accountId: stripe, cents: 0 },
    ]);
    expect(made).toEqual([
      { accountId: escrow, cents: 7 },
      { accountId: wallet, cents: -7 },
    ]);
  });

  it.each([
    ["does not sum to zero", [{ accountId: wallet, cents: 1 }]],
    ["moves nothing", []],
    [
      "moves nothing in the end",
      [
        { accountId: wallet, cents: 1 },
        { accountId: wallet, cents: -1 },
      ],
    ],
    [
      "splits a cent",
      [
        { accountId: wallet, cents: 0.5 },
        { accountId: escrow, cents: -0.5 },
      ],
    ],
  ])("that %s is a bug", (_what, entries) => {
    expect(() => posting(entries)).toThrow(InvariantError);
  });

  it("and its reversal leave nothing behind", () => {
    const made = posting([
      { accountId: wallet, cents: -7 },
      { accountId: escrow, cents: 7 },
    ]);
    expect(() => posting([...made, ...reversal(made)])).toThrow("moves something");
    expect(reversal(reversal(made))).toEqual(made);
  });
});
