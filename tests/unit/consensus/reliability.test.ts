import { describe, expect, it } from "vitest";
import { heatMap } from "@/lib/consensus/heatMap";
import { mergeImage } from "@/lib/consensus/mergeImage";
import { estimateReliability } from "@/lib/consensus/reliability";
import { decideRedundancy, expectedGain, forecastTargets } from "@/lib/consensus/redundancy";
import type { ImageLabels, LabelledInstance } from "@/lib/consensus/types";
import type { Box } from "@/lib/geometry/types";

/** A grid of objects; every person draws them shifted by an amount of their own that changes from image to image. */
const TRUTH: Box[] = [
  [20, 20, 60, 50],
  [120, 30, 50, 60],
  [220, 40, 70, 40],
  [40, 140, 50, 50],
  [160, 150, 60, 60],
];

const drawn = (id: string, [x, y, width, height]: Box, classId = "can"): LabelledInstance => ({
  id,
  classId,
  shape: {
    kind: "polygon",
    rings: [
      [
        [x, y],
        [x + width, y],
        [x + width, y + height],
        [x, y + height],
      ],
    ],
  },
});

/** A repeatable number from -1 to 1. */
const wave = (a: number, b: number) => Math.sin(12.9898 * a + 78.233 * b);

const careful = (person: number, image: number): LabelledInstance[] =>
  TRUTH.map(([x, y, width, height], k) =>
    drawn(`${k}`, [x + 2 * wave(person + k, image), y + 2 * wave(person, image + k), width, height]),
  );

const invented = (person: number, image: number): LabelledInstance[] =>
  [0, 1, 2, 3].map((k) =>
    drawn(`s${k}`, [120 + 110 * wave(person + 3 * k, image), 90 + 80 * wave(person, image + 5 * k), 30, 25]),
  );

const batchOf = (people: Record<string, (image: number) => LabelledInstance[]>, images = 12): ImageLabels[] =>
  Array.from({ length: images }, (_, image) => ({
    width: 320,
    height: 240,
    annotators: Object.entries(people).map(([annotatorId, draw]) => ({
      annotatorId,
      instances: draw(image),
    })),
  }));

describe("what a batch tells about its annotators", () => {
  const batch = batchOf({
    ann: (image) => careful(1, image),
    bea: (image) => careful(2, image),
    cid: (image) => careful(3, image),
    misser: (image) => careful(4, image).slice(0, 3),
    spammer: (image) => invented(5, image),
  });
  const reliability = estimateReliability(batch);

  it("finds who misses and who invents", () => {
    const { ann, misser, spammer } = reliability.annotators;
    expect(ann?.detection.value).toBeGreaterThan(0.95);
    expect(misser?.detection.value).toBeCloseTo(0.6, 1);
    expect(spammer?.falseAlarm.value).toBeGreaterThan(0.8);
    expect(spammer?.inventions).toBeGreaterThan(5 * (ann?.inventions ?? NaN));
    expect(reliability.converged).toBe(true);
  });

  it("trusts one careful person over one who invents", () => {
    const alone = drawn("x", [20, 190, 40, 40]);
    const image = (who: string): ImageLabels => ({
      width: 320,
      height: 240,
      annotators: [
        { annotatorId: who, instances: [alone] },
        { annotatorId: who === "spammer" ? "ann" : "spammer", instances: [] },
      ],
    });
    expect(mergeImage(image("ann"), {}, reliability).agreed).toHaveLength(1);
    expect(mergeImage(image("spammer"), {}, reliability).agreed).toHaveLength(0);
  });

  it("names the classes that a person confuses", () => {
    const mixed = estimateReliability(
      batchOf({
        ann: (image) => careful(1, image),
        bea: (image) => careful(2, image),
        cid: (image) => careful(3, image).map((one) => ({ ...one, classId: "cap" })),
      }),
    );
    const can = mixed.classIds.indexOf("can");
    const cap = mixed.classIds.indexOf("cap");
    expect(mixed.annotators.cid?.confusion[can]?.[cap]).toBeGreaterThan(0.6);
    expect(mixed.annotators.ann?.confusion[can]?.[can]).toBeGreaterThan(0.8);
  });
});

describe("copies", () => {
  const batch = batchOf({
    ann: (image) => careful(1, image),
    bea: (image) => careful(2, image),
    copier: (image) => careful(2, image),
    dan: (image) => careful(4, image),
  });

  it("are found, and count as one voter", () => {
    const reliability = estimateReliability(batch);
    expect(reliability.copies).toMatchObject([{ annotatorIds: ["bea", "copier"], source: "annotator" }]);
    expect(reliability.annotators.ann?.copyOf).toBeNull();
    const { agreed } = mergeImage(batch[0]!, {}, reliability);
    expect(agreed[0]).toMatchObject({ support: 3, seen: 3 });
  });

  it("of the untouched proposals are one voter too, but people who took the same good proposal are not copies", () => {
    const taken = (instances: LabelledInstance[]) =>
      instances.map((one): LabelledInstance => ({ ...one, origin: "taken", proposalId: `pro_${one.id}` }));
    const proposals = (image: number) => taken(careful(9, image));
    const blind = estimateReliability(
      batchOf({
        ann: (image) => careful(1, image),
        eve: proposals,
        fay: proposals,
        gus: (image) => careful(4, image),
      }),
    );
    expect(blind.annotators.eve?.copyOf).toBe("proposals");
    expect(blind.copies).toMatchObject([{ annotatorIds: ["eve", "fay"], source: "proposals" }]);
    const honest = (person: number) => (image: number) => [
      ...proposals(image).slice(0, 3),
      ...careful(person, image).slice(3),
    ];
    const mixed = estimateReliability(
      batchOf({ ann: honest(1), bea: honest(2), cid: (image) => careful(3, image) }),
    );
    expect(mixed.copies).toEqual([]);
  });
});

describe("gold", () => {
  it("unmasks a majority that is wrong together", () => {
    const liar = (person: number) => (image: number) =>
      careful(person, image).map((one) => ({ ...one, classId: "cap" }));
    const batch = batchOf({ honest: (image) => careful(1, image), x: liar(2), y: liar(3) });
    const truth = TRUTH.map((box, k) => drawn(`t${k}`, box));
    const blind = estimateReliability(batch);
    const gold = new Map([0, 1, 2, 3, 4, 5].map((image) => [image, truth]));
    const anchored = estimateReliability(batch, { gold });
    const classOf = (reliability: typeof blind) => mergeImage(batch[9]!, {}, reliability).agreed[0]?.classId;
    expect(classOf(blind)).toBe("cap");
    expect(classOf(anchored)).toBe("can");
    expect(anchored.annotators.honest?.goldImages).toBe(6);
  });
});

describe("one more label", () => {
  const people = (count: number): ImageLabels => ({
    ...batchOf(
      { a: (i) => careful(1, i), b: (i) => careful(2, i), c: (i) => careful(3, i), d: (i) => careful(4, i) },
      1,
    )[0]!,
    annotators: [1, 2, 3, 4]
      .slice(0, count)
      .map((person) => ({ annotatorId: `p${person}`, instances: careful(person, 0) })),
  });

  it("is expected to gain less, the more there are", () => {
    const gains = [1, 2, 3, 4].map((count) => expectedGain(mergeImage(people(count))));
    gains.slice(1).forEach((gain, k) => expect(gain).toBeLessThan(gains[k] ?? NaN));
  });

  it("is asked for while it is worth its money, and the reason names the money", () => {
    const rule = { target: 0.99, labelCents: 20, kMin: 2, kMax: 4 };
    const two = mergeImage(people(2));
    expect(decideRedundancy(two, 2, { ...rule, pointCents: 100 })).toMatchObject({ verdict: "short" });
    const cheap = decideRedundancy(two, 2, { ...rule, pointCents: 1 });
    expect(cheap.verdict).toBe("settled");
    expect(cheap.reason).toContain("20 cents");
    expect(decideRedundancy(mergeImage(people(4)), 4, { ...rule, pointCents: 100 }).verdict).toBe("split");
    expect(decideRedundancy(two, 1, { ...rule, pointCents: 1 }).verdict).toBe("short");
  });

  it("is forecast for every target: a higher one settles fewer and costs more", () => {
    const images = [0.6, 0.7, 0.8, 0.9, 0.95].map((agreement) => ({ agreement, labels: 3 }));
    const [low, high] = forecastTargets(images, [0.7, 0.9], { labelCents: 25, kMin: 2, kMax: 7 });
    expect(low).toMatchObject({ settled: 4, short: 1, split: 0 });
    expect(high).toMatchObject({ settled: 2, short: 3 });
    expect(high?.costCents).toBeGreaterThan(low?.costCents ?? NaN);
    expect((high?.costCents ?? 0) % 25).toBe(0);
  });
});

it("a heat map glows where half of the people drew, and along the edge of what all drew", () => {
  const image: ImageLabels = {
    width: 200,
    height: 200,
    annotators: [0, 1, 2, 3].map((k) => ({
      annotatorId: `p${k}`,
      instances: [
        drawn("sure", [20 + 2 * k, 20, 60, 60]),
        ...(k < 2 ? [drawn("doubt", [120, 120, 40, 40])] : []),
      ],
    })),
  };
  const { width, cellPx, values } = heatMap(image);
  const at = (x: number, y: number) => values[Math.floor(y / cellPx) * width + Math.floor(x / cellPx)] ?? NaN;
  expect(at(140, 140)).toBeCloseTo(1, 5);
  expect(at(50, 50)).toBeCloseTo(0, 5);
  expect(at(23, 50)).toBeGreaterThan(0.7);
  expect(at(190, 10)).toBe(0);
});
