import { readFileSync } from "node:fs";
import path from "node:path";
import { describe, expect, it } from "vitest";
import { CLASS_COLOURS, contrastRatio, inkOn, relativeLuminance } from "@/components/ui/classPalette";

// Source of the formula and of both limits: W3C, Web Content Accessibility Guidelines 2.2 (2023), definitions
// "contrast ratio" and "relative luminance", criteria 1.4.3 (text, 4.5) and 1.4.11 (non-text, 3).
const TEXT_MIN = 4.5;
const NON_TEXT_MIN = 3;

const css = readFileSync(path.resolve(import.meta.dirname, "../../../app/globals.css"), "utf8");

const THEMES = {
  light: tokensOf(/^:root \{([^}]*)\}/m),
  "dark by the system": tokensOf(/:root:not\(\[data-theme="light"\]\) \{([^}]*)\}/),
  "dark by choice": tokensOf(/^:root\[data-theme="dark"\] \{([^}]*)\}/m),
};

const GROUNDS = ["paper", "sheet", "sunk"] as const;
const STATES = ["agreed", "waits", "disputed"] as const;

const TEXT_PAIRS: readonly (readonly [ink: string, ground: string])[] = [
  ...GROUNDS.flatMap((ground) => [
    ["ink", ground] as const,
    ["muted", ground] as const,
    ...STATES.map((state) => [`${state}-ink`, ground] as const),
  ]),
  ...STATES.flatMap((state) => [
    ["ink", `${state}-soft`] as const,
    ["muted", `${state}-soft`] as const,
    [`${state}-ink`, `${state}-soft`] as const,
  ]),
  ["sheet", "ink"], // primary button
  ["paper", "ink"], // message at the foot of the page, tooltip, skip link
  ["sheet", "disputed-ink"], // button that destroys or pays
  ["stage-ink", "stage"],
];

const NON_TEXT_PAIRS: readonly (readonly [mark: string, ground: string])[] = [
  ...GROUNDS.flatMap((ground) => [
    ["rule", ground] as const, // edges of controls
    ["focus", ground] as const,
    ...STATES.map((state) => [state, ground] as const), // bars, lines, signs
  ]),
  ...STATES.flatMap((state) => [[state, `${state}-soft`] as const, ["focus", `${state}-soft`] as const]),
];

describe.each(Object.entries(THEMES))("the field sheet, %s", (_name, tokens) => {
  it.each(TEXT_PAIRS)("text in %s on %s has a contrast of at least 4.5", (ink, ground) => {
    expect(contrastRatio(colour(tokens, ink), colour(tokens, ground))).toBeGreaterThanOrEqual(TEXT_MIN);
  });

  it.each(NON_TEXT_PAIRS)("a mark in %s on %s has a contrast of at least 3", (mark, ground) => {
    expect(contrastRatio(colour(tokens, mark), colour(tokens, ground))).toBeGreaterThanOrEqual(NON_TEXT_MIN);
  });
});

it("is the same sheet whether dark comes from the system or from the toggle", () => {
  expect(THEMES["dark by choice"]).toEqual(THEMES["dark by the system"]);
});

it("gives every colour of the light sheet a dark one", () => {
  expect([...THEMES["dark by choice"].keys()].sort()).toEqual([...THEMES.light.keys()].sort());
});

describe("contrast ratio", () => {
  // WCAG 2.2: "contrast ratios can range from 1 to 21".
  it("is 21 for black on white and 1 for a colour on itself, in either order", () => {
    expect(contrastRatio("#000000", "#ffffff")).toBeCloseTo(21, 10);
    expect(contrastRatio("#ffffff", "#000000")).toBeCloseTo(21, 10);
    expect(contrastRatio("#3a4f1c", "#3a4f1c")).toBe(1);
  });

  // By hand: 0x76 / 255 = 0.462745, linear 0.181164; (1 + 0.05) / (0.181164 + 0.05) = 4.5423.
  it("puts #767676, the lightest grey allowed for text on white, just above 4.5", () => {
    expect(relativeLuminance("#767676")).toBeCloseTo(0.181164, 6);
    expect(contrastRatio("#767676", "#ffffff")).toBeCloseTo(4.5423, 3);
    expect(contrastRatio("#777777", "#ffffff")).toBeLessThan(TEXT_MIN);
  });

  it("refuses what is not a six-digit colour", () => {
    expect(() => relativeLuminance("#fff")).toThrow(RangeError);
  });
});

it.each(CLASS_COLOURS.map(({ name, hex }) => [name, hex]))("the number on %s can be read", (_name, hex) => {
  expect(contrastRatio(inkOn(hex), hex)).toBeGreaterThanOrEqual(TEXT_MIN);
});

function tokensOf(rule: RegExp): Map<string, string> {
  const body = rule.exec(css)?.[1] ?? "";
  const pairs = [...body.matchAll(/--([a-z-]+):\s*(#[0-9a-f]{6});/g)];
  return new Map(pairs.map((pair) => [pair[1] ?? "", pair[2] ?? ""]));
}

function colour(tokens: Map<string, string>, name: string): string {
  const value = tokens.get(name);
  if (value === undefined) throw new Error(`globals.css has no --${name} in this theme`);
  return value;
}
