import type { BatchPlan } from "./batches";

export type ScenePlan = Omit<BatchPlan, "pictures"> & {
  scene: "wrack-line" | "glasshouse";
  /** Seeds of the pictures; each gives the same picture on every machine. */
  seeds: number[];
  prefix: string;
};

const range = (from: number, count: number) => Array.from({ length: count }, (_, index) => from + index);

const SHORE_KEY = [
  { number: 1, name: "bottle", colour: "#D55E00", pattern: "solid", geometry: "polygon" },
  { number: 2, name: "cap", colour: "#56B4E9", pattern: "rising", geometry: "box" },
  { number: 3, name: "rope", colour: "#009E73", pattern: "dots", geometry: "polygon" },
  { number: 4, name: "float", colour: "#F0E442", pattern: "falling", geometry: "polygon" },
  { number: 5, name: "can", colour: "#CC79A7", pattern: "crossed", geometry: "polygon" },
] as const;

const SHORE_BRIEF = `## What to draw

Every piece of litter on the wrack line that belongs to a class of the key: **bottle**, **cap**, **rope**, **float** (of a net) and **can**. Also what is partly buried or lies under weed, as far as you can see it.

## What to leave out

- weed, shells, pebbles, driftwood
- shadows and reflections in wet sand

## How exact

Follow the visible edge. Where one thing lies on another, draw only what you can see of the lower one. A coil of rope is one object; two pieces that do not touch are two. Caps need a box only.
`;

export const SPRING_TIDE: ScenePlan = {
  title: "Wrack line, spring tide",
  scene: "wrack-line",
  seeds: range(101, 9),
  prefix: "spring",
  classes: [...SHORE_KEY],
  brief: SHORE_BRIEF,
  kMin: 3,
  kMax: 5,
  agreementTarget: 0.6,
  expectedInstances: 10,
  pay: { baseCents: 10, boxCents: 4, polygonCents: 12, capCents: 220 },
};

export const NEAP_TIDE: ScenePlan = {
  ...SPRING_TIDE,
  title: "Wrack line, neap tide",
  seeds: range(201, 7),
  prefix: "neap",
};

export const GLASSHOUSE: ScenePlan = {
  title: "Harrow Lane glasshouse",
  scene: "glasshouse",
  seeds: range(301, 8),
  prefix: "tray",
  classes: [
    { number: 1, name: "seedling", colour: "#009E73", pattern: "solid", geometry: "polygon" },
    { number: 2, name: "empty cell", colour: "#D55E00", pattern: "rising", geometry: "box" },
  ],
  brief: `## What to draw

Every **seedling** with all its leaves as one outline, and a box around every **empty cell** of the tray.

## What to leave out

Seedlings of which less than a third is in the picture. Moss on the compost.

## How exact

Follow the leaves; the gaps between them may stay in the outline. Where two seedlings touch, draw two.
`,
  kMin: 3,
  kMax: 4,
  agreementTarget: 0.6,
  expectedInstances: 20,
  pay: { baseCents: 10, boxCents: 2, polygonCents: 6, capCents: 200 },
};
