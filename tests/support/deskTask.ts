import type { DeskClass, DeskInstance, DeskProposal, DeskTask } from "@/lib/contracts/desk";
import type { Point, Rings } from "@/lib/geometry/types";

export const CAN: DeskClass = {
  id: "can",
  number: 1,
  name: "can",
  colour: "#0072b2",
  geometry: "polygon",
};
export const FLOAT: DeskClass = { ...CAN, id: "float", number: 2, name: "net float", geometry: "box" };

export const SIZE = { width: 1280, height: 960 };

export function deskTask(over: Partial<DeskTask> = {}): DeskTask {
  return {
    claimId: "clm_1",
    batchTitle: "Wrack line, spring tide",
    imageName: "shore-01.jpg",
    imageUrl: "/shore-01.jpg",
    ...SIZE,
    classes: [CAN, FLOAT],
    proposals: [],
    dealing: { adjustedShare: 0, firstFew: 0 },
    brief: { version: 1, markdown: "", examples: [] },
    pay: { baseCents: 4, boxCents: 2, polygonCents: 6, capCents: 90 },
    medianSeconds: null,
    expiresAtMs: 0,
    draft: null,
    draftVersion: 0,
    sensitive: false,
    ...over,
  };
}

export function square(x: number, y: number, side: number): Rings {
  const [right, bottom] = [x + side, y + side];
  return [
    [
      [x, y],
      [right, y],
      [right, bottom],
      [x, bottom],
    ] as Point[],
  ];
}

export function instance(id: string, rings: Rings, over: Partial<DeskInstance> = {}): DeskInstance {
  return {
    id,
    classId: "can",
    shape: { kind: "polygon", rings },
    origin: "drawn",
    proposalId: null,
    crowd: false,
    occluded: false,
    truncated: false,
    note: "",
    ...over,
  };
}

export function proposal(id: string, rings: Rings, over: Partial<DeskProposal> = {}): DeskProposal {
  return { id, classId: "can", shape: { kind: "polygon", rings }, score: 0.9, ...over };
}
