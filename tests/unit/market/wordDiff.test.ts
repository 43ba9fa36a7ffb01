import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { wordDiff } from "@/lib/market/disputes/wordDiff";

const joined = (parts: ReturnType<typeof wordDiff>, without: "added" | "removed") =>
  parts
    .filter((part) => part.kind !== without)
    .map((part) => part.text)
    .join("");

describe("what changed between two texts", () => {
  it("is told word by word", () => {
    expect(wordDiff("Draw every bottle.", "Draw every whole bottle.")).toEqual([
      { kind: "same", text: "Draw every " },
      { kind: "added", text: "whole " },
      { kind: "same", text: "bottle." },
    ]);
    expect(wordDiff("caps count", "caps matter")).toEqual([
      { kind: "same", text: "caps " },
      { kind: "removed", text: "count" },
      { kind: "added", text: "matter" },
    ]);
  });

  it("is nothing where nothing changed, and all where one is empty", () => {
    expect(wordDiff("a b", "a b")).toEqual([{ kind: "same", text: "a b" }]);
    expect(wordDiff("", "")).toEqual([]);
    expect(wordDiff("", "new")).toEqual([{ kind: "added", text: "new" }]);
    expect(wordDiff("old", "")).toEqual([{ kind: "removed", text: "old" }]);
  });

  it("keeps as much as can be kept: the longest common subsequence of a worked example", () => {
    // Hunt and McIlroy, 1976, and Myers, 1986: ABCABBA and CBABAC have 4 in common.
    const kept = wordDiff("A B C A B B A".replaceAll(" ", "\n"), "C B A B A C".replaceAll(" ", "\n"))
      .filter((part) => part.kind === "same")
      .flatMap((part) => part.text.match(/\w/g) ?? []);
    expect(kept).toHaveLength(4);
  });

  it("gives both texts back, whatever they are", () => {
    const text = fc.array(fc.constantFrom("net", "cap", "rope", " ", "\n", "  "), { maxLength: 30 });
    fc.assert(
      fc.property(text, text, (a, b) => {
        const parts = wordDiff(a.join(""), b.join(""));
        expect(joined(parts, "added")).toBe(a.join(""));
        expect(joined(parts, "removed")).toBe(b.join(""));
        parts.forEach((part, index) => expect(part.kind).not.toBe(parts[index - 1]?.kind));
      }),
    );
  });
});
