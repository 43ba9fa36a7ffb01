import { describe, expect, it } from "vitest";
import { hitTest } from "@/lib/desk/hit";
import { actionOf, DEFAULT_KEYS, keysText, parseKeys, rebind } from "@/lib/desk/keys";
import { mend, problemOf, simplifyStretch } from "@/lib/desk/shapes";
import { deal, expectedSecondsSaved } from "@/lib/desk/tray";
import { fitBox, SCALE_MAX, SCALE_MIN, toImage, toScreen, zoomAt } from "@/lib/desk/viewport";
import { isSequel } from "@/components/desk/draftKeeper";
import type { Point } from "@/lib/geometry/types";
import { CAN, FLOAT, instance, proposal, square } from "@/tests/support/deskTask";

describe("the viewport", () => {
  it("keeps the point under the pointer in its place at every zoom, and stays between 5 % and 3,200 %", () => {
    let view = fitBox([0, 0, 4000, 3000], 900, 600);
    const at: Point = [333, 217];
    const before = toImage(view, at);
    for (const factor of [2, 3, 1.7, 0.4, 9, 0.01, 50, 1e9, 1e-9]) {
      view = zoomAt(view, at, factor);
      const [x, y] = toImage(view, at);
      expect(x).toBeCloseTo(before[0], 6);
      expect(y).toBeCloseTo(before[1], 6);
      expect(view.scale).toBeGreaterThanOrEqual(SCALE_MIN);
      expect(view.scale).toBeLessThanOrEqual(SCALE_MAX);
    }
    const [sx, sy] = toScreen(view, toImage(view, [12, 34]));
    expect(sx).toBeCloseTo(12, 6);
    expect(sy).toBeCloseTo(34, 6);
  });
});

describe("hit testing", () => {
  const big = instance("big", square(0, 0, 400));
  const small = instance("small", square(100, 100, 50));
  const ringed = instance("ringed", [...square(500, 0, 200), ...square(550, 50, 100)]);
  const all = [small, big, ringed];
  const at = (point: Point, selectedId: string | null = null, hidden: string[] = []) =>
    hitTest(all, point, { selectedId, slop: 5, hiddenClassIds: new Set(hidden) });

  it("finds the smallest shape that holds the point", () => {
    expect(at([120, 120])).toEqual({ part: "body", id: "small" });
    expect(at([20, 20])).toEqual({ part: "body", id: "big" });
  });
  it("sees through a hole", () => {
    expect(at([600, 100])).toEqual({ part: "ground" });
    expect(at([510, 100])).toEqual({ part: "body", id: "ringed" });
  });
  it("finds points and edges of the selected shape only, points first", () => {
    expect(at([102, 98], "small")).toEqual({ part: "vertex", id: "small", ring: 0, vertex: 0 });
    expect(at([125, 98], "small")).toEqual({ part: "edge", id: "small", ring: 0, vertex: 0, at: [125, 100] });
    expect(at([102, 98])).toEqual({ part: "body", id: "big" });
  });
  it("does not find what is hidden", () => {
    expect(at([120, 120], null, ["can"])).toEqual({ part: "ground" });
  });
});

describe("outlines", () => {
  it("mends a figure of eight, also where it crosses exactly in a point", () => {
    const eight: Point[] = [
      [0, 0],
      [100, 100],
      [100, 0],
      [0, 100],
    ];
    const throughPoint: Point[] = [
      [0, 0],
      [50, 50],
      [100, 100],
      [100, 0],
      [50, 50],
      [0, 100],
    ];
    for (const ring of [eight, throughPoint]) {
      expect(problemOf(ring)).toBe("crosses");
      const mended = mend([ring]);
      expect(mended).toBeDefined();
      for (const part of mended ?? []) expect(problemOf(part)).toBeUndefined();
    }
  });
  it("keeps a straight stretch as its two ends, and a corner", () => {
    const straight = Array.from({ length: 50 }, (_, i): Point => [i, 0]);
    const turn = Array.from({ length: 50 }, (_, i): Point => [49, i]);
    expect(simplifyStretch(straight, 0.5)).toEqual([
      [0, 0],
      [49, 0],
    ]);
    expect(simplifyStretch([...straight, ...turn.slice(1)], 0.5)).toEqual([
      [0, 0],
      [49, 0],
      [49, 49],
    ]);
  });
});

describe("the tray's order", () => {
  const nothing = { instances: [], dismissedProposalIds: [] };
  it("deals an outline before an equally likely box, since it saves more", () => {
    const dealt = deal(
      [proposal("box", square(0, 0, 50), { classId: "float" }), proposal("outline", square(200, 0, 50))],
      nothing,
      [CAN, FLOAT],
    );
    expect(dealt.map((entry) => entry.id)).toEqual(["outline", "box"]);
  });
  it("does not deal what costs more to judge than it saves, nor what is drawn already", () => {
    expect(expectedSecondsSaved(0.05, "box")).toBeLessThan(0);
    expect(deal([proposal("bad", square(0, 0, 50), { score: 0.01 })], nothing, [CAN])).toEqual([]);
    const drawn = { ...nothing, instances: [instance("a", square(2, 2, 50))] };
    expect(deal([proposal("same", square(0, 0, 50))], drawn, [CAN])).toEqual([]);
  });
  it("deals the best few of any score until acceptance is measured, and no new ones for those sent away", () => {
    const weak = [0.09, 0.08, 0.07, 0.06, 0.001].map((score, n) =>
      proposal(`weak${n}`, square(100 * n, 0, 50), { score }),
    );
    const dealing = { adjustedShare: 0.25, firstFew: 3 };
    const ids = (dismissedProposalIds: string[]) =>
      deal(weak, { ...nothing, dismissedProposalIds }, [CAN], dealing).map(({ id }) => id);
    expect(ids([])).toEqual(["weak0", "weak1", "weak2"]);
    expect(ids(["weak1"])).toEqual(["weak0", "weak2"]);
    expect(deal(weak, nothing, [CAN], { ...dealing, firstFew: 0 })).toEqual([]);
    expect(deal(weak.slice(4), nothing, [CAN], dealing)).toEqual([]);
  });
  it("asks for a likelier proposal where many need adjusting", () => {
    const saved = (adjustedShare: number) => expectedSecondsSaved(0.3, "polygon", { adjustedShare });
    expect(saved(0.8)).toBeLessThan(saved(0.1));
  });
});

describe("the keys", () => {
  it("gives each key one meaning, whatever its case", () => {
    const keys = Object.values(DEFAULT_KEYS);
    expect(new Set(keys).size).toBe(keys.length);
    expect(actionOf(DEFAULT_KEYS, "J")).toBe("take");
    expect(actionOf(DEFAULT_KEYS, "=")).toBe("zoomIn");
  });
  it("refuses a key that is taken or a number, and keeps a free one", () => {
    expect(rebind(DEFAULT_KEYS, "take", "k").ok).toBe(false);
    expect(rebind(DEFAULT_KEYS, "take", "3").ok).toBe(false);
    const own = rebind(DEFAULT_KEYS, "take", "Q");
    if (!own.ok) throw new Error(own.reason);
    expect(parseKeys(keysText(own.keys))).toEqual(own.keys);
  });
  it("falls back to the defaults on anything it cannot read", () => {
    for (const text of [null, "", "{", "7", '{"take":7}', '{"take":"k"}'])
      expect(parseKeys(text)).toEqual(DEFAULT_KEYS);
  });
});

describe("a drawing kept by the browser", () => {
  const drawn = { instances: [instance("a", square(0, 0, 9))], dismissedProposalIds: [] };
  const none = { instances: [], dismissedProposalIds: [] };
  it("goes on from the server's when it was made on that version", () => {
    expect(isSequel({ document: drawn, version: 3, sending: null }, { draft: none, draftVersion: 3 })).toBe(
      true,
    );
  });
  it("goes on when the server's is our own save whose answer was lost, whatever the order of its fields", () => {
    const { instances, ...rest } = none;
    const server = { draft: { ...rest, instances }, draftVersion: 4 };
    expect(isSequel({ document: drawn, version: 3, sending: none }, server)).toBe(true);
  });
  it("gives way when another tab saved meanwhile", () => {
    expect(isSequel({ document: drawn, version: 3, sending: drawn }, { draft: none, draftVersion: 4 })).toBe(
      false,
    );
    expect(isSequel({ document: drawn, version: 3, sending: null }, { draft: none, draftVersion: 5 })).toBe(
      false,
    );
  });
});
