import { describe, expect, it } from "vitest";
import { savingsOf } from "@/lib/market/proposals/savings";

const NONE = {
  submissions: 0,
  takenBoxes: 0,
  takenOutlines: 0,
  adjustedBoxes: 0,
  adjustedOutlines: 0,
  dismissed: 0,
  drawn: 0,
};

describe("what proposals saved", () => {
  it("is nothing, with no shares, where nobody decided on one", () => {
    expect(savingsOf({ ...NONE, submissions: 2, drawn: 5 }, 1500)).toEqual({
      decided: 0,
      takenShare: null,
      adjustedShare: null,
      dismissedShare: null,
      coveredShare: 0,
      savedSeconds: 0,
      savedCents: 0,
    });
  });

  it("is the time between drawing and deciding, in money at the measured pay", () => {
    // By hand from the keystroke-level model: outline 12.27 s, box 3.95 s, check 1.63 s, adjust 3.95 s.
    const saved = savingsOf(
      {
        ...NONE,
        submissions: 1,
        takenOutlines: 6,
        adjustedOutlines: 2,
        takenBoxes: 1,
        dismissed: 1,
        drawn: 5,
      },
      1800,
    );
    expect(saved.savedSeconds).toBeCloseTo(6 * 10.64 + 2 * 6.69 + 2.32 - 1.63, 6);
    expect(saved.savedCents).toBe(39);
    expect([saved.takenShare, saved.adjustedShare, saved.dismissedShare]).toEqual([0.7, 0.2, 0.1]);
    expect(saved.coveredShare).toBeCloseTo(9 / 14, 9);
  });

  it("is below zero where most were sent away, and has no price where no pay is measured", () => {
    const lost = savingsOf({ ...NONE, submissions: 1, dismissed: 10 }, null);
    expect(lost.savedSeconds).toBeCloseTo(-16.3, 6);
    expect(lost.savedCents).toBeNull();
  });
});
