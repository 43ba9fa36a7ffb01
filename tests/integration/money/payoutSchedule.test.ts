import { eq } from "drizzle-orm";
import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import { ledgerViolations } from "@/db/queries/ledger";
import { listPayoutsOf } from "@/db/queries/payments";
import { users } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { PayoutScheduleInput } from "@/lib/contracts/payments";
import {
  findPayoutSchedule,
  nextDueMs,
  payOnSchedule,
  setPayoutSchedule,
} from "@/lib/market/money/payoutSchedule";
import { cents, letters, person } from "@/tests/support/market";
import { Bank } from "./bank";

const HOUR_MS = 3_600_000;
const DAY_MS = 24 * HOUR_MS;
const utc = (text: string) => Date.parse(`${text}Z`);

describe("the next due time", () => {
  // Weekdays by the calendar: 2 March 2026 is a Monday; 2028 is a leap year.
  it.each([
    ["weekly on Friday, asked on a Monday", "weekly", 5, "2026-03-02T09:00", "2026-03-06T06:00"],
    ["weekly, asked that day before the hour", "weekly", 1, "2026-03-02T05:59", "2026-03-02T06:00"],
    ["weekly, asked that day at the hour", "weekly", 1, "2026-03-02T06:00", "2026-03-09T06:00"],
    ["weekly on Sunday, day 7 of ISO 8601", "weekly", 7, "2026-03-02T09:00", "2026-03-08T06:00"],
    ["weekly over the turn of the year", "weekly", 5, "2026-12-31T09:00", "2027-01-01T06:00"],
    ["monthly", "monthly", 5, "2026-03-02T09:00", "2026-04-01T06:00"],
    ["monthly over the turn of the year", "monthly", 5, "2026-12-01T06:00", "2027-01-01T06:00"],
    ["monthly after a leap day", "monthly", 5, "2028-02-29T23:59", "2028-03-01T06:00"],
  ] as const)("%s", (_name, rhythm, weekday, after, due) => {
    expect(nextDueMs({ rhythm, weekday }, utc(after))).toBe(utc(due));
  });

  it("is none for never", () => {
    expect(nextDueMs({ rhythm: "never", weekday: 5 }, utc("2026-03-02T09:00"))).toBeNull();
  });
});

describe("a payout schedule", () => {
  let bank: Bank;
  let teamId: string;
  let annotator: Actor;
  beforeAll(async () => void (bank = await Bank.open()));
  afterAll(() => bank.close());
  beforeEach(async () => {
    await bank.reset();
    ({ teamId } = await bank.wealthy(10_000));
    annotator = await bank.earner(teamId, 2500);
  });

  const rows = () => listPayoutsOf(bank.db, annotator.id);
  const choose = (input: Partial<PayoutScheduleInput> = {}, nowMs = Date.now()) => {
    const all: PayoutScheduleInput = { rhythm: "weekly", weekday: 3, leastCents: 500, ...input };
    return setPayoutSchedule({ actor: annotator, nowMs, input: all }).dueAtMs ?? 0;
  };

  it("pays all that is payable when it is due, not before, and on to the bank", async () => {
    const dueMs = choose();
    expect(payOnSchedule({ nowMs: dueMs - 1 })).toEqual({ begun: 0 });
    expect(payOnSchedule({ nowMs: dueMs })).toEqual({ begun: 1 });
    expect(rows()).toMatchObject([{ amountCents: 2500, scheduledForMs: dueMs, status: "queued" }]);
    expect(await bank.quiet(dueMs - Date.now() + HOUR_MS)).toEqual([]);
    expect(rows()).toMatchObject([{ status: "paid" }]);
    expect(letters(bank.db, "payout").map((letter) => letter.subject)).toEqual([
      "Your payout is on its way",
      "Your payout arrived",
    ]);
    expect(ledgerViolations(bank.db)).toEqual([]);
  });

  it("pays once however often the job runs, and again a week later for what came since", () => {
    const dueMs = choose();
    for (const _run of [1, 2, 3]) payOnSchedule({ nowMs: dueMs });
    expect(rows()).toHaveLength(1);
    bank.earn(annotator, teamId, 700, "bat_later");
    payOnSchedule({ nowMs: dueMs + DAY_MS });
    expect(rows()).toHaveLength(1);
    payOnSchedule({ nowMs: dueMs + 7 * DAY_MS });
    expect(
      rows()
        .map((row) => row.amountCents)
        .sort(),
    ).toEqual([2500, 700]);
  });

  it("makes one payout after a long sleep, not one for each time that passed", () => {
    const dueMs = choose();
    payOnSchedule({ nowMs: dueMs + 30 * DAY_MS });
    bank.earn(annotator, teamId, 700, "bat_later");
    payOnSchedule({ nowMs: dueMs + 30 * DAY_MS });
    expect(rows()).toHaveLength(1);
    expect(findPayoutSchedule(bank.db, annotator.id)?.dueAtMs).toBeGreaterThan(dueMs + 30 * DAY_MS);
  });

  it("leaves less than the least for the next time", () => {
    const dueMs = choose({ leastCents: 2501 });
    payOnSchedule({ nowMs: dueMs });
    expect(rows()).toEqual([]);
    expect(cents(bank.db, "payable", annotator.id)).toBe(2500);
    bank.earn(annotator, teamId, 1, "bat_later");
    payOnSchedule({ nowMs: dueMs + 7 * DAY_MS });
    expect(rows()).toMatchObject([{ amountCents: 2501 }]);
  });

  it("can be turned off", () => {
    const dueMs = choose();
    choose({ rhythm: "never" });
    expect(payOnSchedule({ nowMs: dueMs + DAY_MS })).toEqual({ begun: 0 });
  });

  it("keeps the money and writes when there is no bank account to send it to", () => {
    const newcomer = person(bank.db, "annotator");
    bank.earn(newcomer, teamId, 900);
    annotator = newcomer;
    const dueMs = choose();
    payOnSchedule({ nowMs: dueMs });
    expect(rows()).toEqual([]);
    expect(letters(bank.db, "payout")).toMatchObject([
      { to: newcomer.email, subject: "Your payout could not begin" },
    ]);
  });

  it("does not pay an account that an admin has suspended", () => {
    const dueMs = choose();
    bank.db.update(users).set({ status: "suspended" }).where(eq(users.id, annotator.id)).run();
    payOnSchedule({ nowMs: dueMs });
    expect(rows()).toEqual([]);
  });

  it("refuses a weekday that is none and an amount below the least payout", () => {
    const parse = (input: object) =>
      PayoutScheduleInput.safeParse({ rhythm: "weekly", weekday: 1, leastCents: 100, ...input }).success;
    expect(parse({})).toBe(true);
    expect(parse({ weekday: 0 })).toBe(false);
    expect(parse({ weekday: 8 })).toBe(false);
    expect(parse({ leastCents: 99 })).toBe(false);
    expect(parse({ rhythm: "daily" })).toBe(false);
  });
});
