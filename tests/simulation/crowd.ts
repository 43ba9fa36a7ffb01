import type { Actor } from "@/lib/auth/actor";
import type { DeskDocument } from "@/lib/contracts/desk";
import type { Random } from "./random";

export const KINDS = ["careful", "sloppy", "spammer", "copier", "disputer", "slow"] as const;
export type Kind = (typeof KINDS)[number];

export type Held = { claimId: string; batchId: string; imageId: string; version: number; sinceMs: number };

/** One annotator, and what this person believes: only what was answered is known. */
export type Annotator = {
  actor: Actor;
  kind: Kind;
  held: Held[];
  /** Handed in, and the answer came. */
  done: string[];
  /** Batches that had no picture for this person, and the step at which they said so. */
  bored: Map<string, number>;
  isOnboarded: boolean;
};

/** An object that is really there: corners of a rectangle or of a quadrilateral, in px. */
type Thing = { isOutline: boolean; corners: [number, number][] };
export type Picture = { imageId: string; batchId: string; classIds: string[]; things: Thing[] };

const WIDTH = 640;
const HEIGHT = 480;

/** What can be seen on a picture: three to six things, apart from each other. */
export function seeThings(dice: Random): Thing[] {
  const count = dice.int(3, 6);
  return Array.from({ length: count }, (_, place) => {
    const left = 20 + (place % 3) * 205;
    const top = 20 + Math.floor(place / 3) * 225;
    const [x, y] = [left + dice.int(0, 40), top + dice.int(0, 40)];
    const [w, h] = [dice.int(60, 130), dice.int(60, 150)];
    const isOutline = dice.chance(0.3);
    const lean = isOutline ? dice.int(5, 25) : 0;
    return {
      isOutline,
      corners: [
        [x + lean, y],
        [x + w, y + lean],
        [x + w - lean, y + h],
        [x, y + h - lean],
      ],
    };
  });
}

const within = (value: number, max: number) => Math.min(max, Math.max(0, Math.round(value)));

/** What a person of this kind draws; a copier takes what `others` handed in. */
export function draw(
  kind: Kind,
  picture: Picture,
  others: readonly DeskDocument[],
  dice: Random,
): DeskDocument {
  const copied = kind === "copier" ? others[others.length - 1] : undefined;
  if (copied) return copied;
  const isBad = kind === "sloppy" || kind === "copier";
  const [spreadPx, missShare] = isBad ? [9, 0.2] : [1.5, 0.02];
  const things =
    kind === "spammer"
      ? Array.from({ length: dice.int(1, 5) }, () => anywhere(dice))
      : picture.things.filter(() => !dice.chance(missShare));
  const instances = things.map(({ isOutline, corners }, index): DeskDocument["instances"][number] => {
    const moved = corners.map(([x, y]): [number, number] => [
      within(x + spreadPx * dice.normal(), WIDTH),
      within(y + spreadPx * dice.normal(), HEIGHT),
    ]);
    const [xs, ys] = [moved.map(([x]) => x), moved.map(([, y]) => y)];
    const [x, y] = [Math.min(...xs), Math.min(...ys)];
    const [w, h] = [Math.max(...xs) - x, Math.max(...ys) - y];
    return {
      id: `shape-${index + 1}`,
      classId: picture.classIds[isOutline ? 1 : 0] ?? "",
      shape: isOutline
        ? { kind: "polygon", rings: [moved] }
        : { kind: "box", box: [x, y, Math.max(1, w), Math.max(1, h)] },
      origin: "drawn",
      proposalId: null,
      crowd: false,
      occluded: false,
      truncated: false,
      note: "",
    };
  });
  return { instances, dismissedProposalIds: [] };
}

function anywhere(dice: Random): Thing {
  const [x, y] = [dice.int(0, 500), dice.int(0, 350)];
  const [w, h] = [dice.int(20, 130), dice.int(20, 120)];
  return {
    isOutline: dice.chance(0.3),
    corners: [
      [x, y],
      [x + w, y],
      [x + w, y + h],
      [x, y + h],
    ],
  };
}
