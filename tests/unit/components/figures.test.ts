import { describe, expect, it } from "vitest";
import { formatDuration, formatPercent } from "@/components/ui/Figures";
import { relativeText } from "@/components/ui/When";
import { isPlaceOf, navFor } from "@/components/shell/nav";

describe("a percentage", () => {
  it.each([
    [0.874, 0, "87%"],
    [0.8749, 1, "87.5%"],
    [0, 0, "0%"],
    [1, 0, "100%"],
    [0.0004, 0, "under 1%"],
    [0.9996, 0, "over 99%"],
    [0.99996, 1, "over 99.9%"],
    [Number.NaN, 0, "not known"],
  ])("of %f to %i digits is %s: an end is only claimed when it is reached", (fraction, digits, text) => {
    expect(formatPercent(fraction, digits)).toBe(text);
  });
});

describe("a length of time", () => {
  it.each([
    [0, "0 s"],
    [59_400, "59 s"],
    [59_600, "1 min"],
    [74_000, "1 min 14 s"],
    [3_599_600, "1 h"],
    [5_400_000, "1 h 30 min"],
    [90_000_000, "1 d 1 h"],
  ])("of %i ms is %s", (ms, text) => {
    expect(formatDuration(ms)).toBe(text);
  });
});

describe("a moment told from now", () => {
  const minute = 60_000;
  it.each([
    [0, "now"],
    [-59_000, "now"],
    [-90_000, "1 minute ago"],
    [5 * minute, "in 5 minutes"],
    [-119 * minute, "1 hour ago"],
    [-25 * 60 * minute, "yesterday"],
  ])("%i ms away is %s", (ms, text) => {
    expect(relativeText(ms)).toBe(text);
  });
});

describe("the places of a role", () => {
  it("hold the mailbox only where a local stand-in runs", () => {
    expect(navFor("annotator").map((item) => item.label)).not.toContain("Mailbox");
    expect(navFor("annotator", { mailboxHref: "http://127.0.0.1:3903" }).at(-1)).toMatchObject({
      label: "Mailbox",
      external: true,
    });
  });

  it("are current for the pages below them and for no page that only begins alike", () => {
    expect(isPlaceOf("/batches", "/batches")).toBe(true);
    expect(isPlaceOf("/batches", "/batches/bat_1/quality")).toBe(true);
    expect(isPlaceOf("/work", "/workers")).toBe(false);
  });
});
