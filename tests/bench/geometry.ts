import { execFileSync, spawnSync } from "node:child_process";
import { existsSync, readFileSync } from "node:fs";
import { createRequire } from "node:module";
import path from "node:path";
import { Clipper, ClipType, FillRule } from "clipper2-ts";
import polygonClipping from "polygon-clipping";
import { boxOfRings, ringOfBox, boxIntersectionArea } from "@/lib/geometry/box";
import { candidatePairs } from "@/lib/geometry/pairs";
import { maskArea, maskIou, rasteriseRings } from "@/lib/geometry/mask";
import { prepareRings, regionIou, ringsArea, ringsIou } from "@/lib/geometry/region";
import { prepareRle, rleFromMask, rleIou, rleToString } from "@/lib/geometry/rle";
import { simplifyRings } from "@/lib/geometry/simplify";
import { traceMask } from "@/lib/geometry/trace";
import type { Point, Rings } from "@/lib/geometry/types";
import { golden } from "@/tests/support/golden";

/**
 * `npm run bench:geometry`: our geometry beside general-purpose libraries, in one run on one core. Ratios in one run count,
 * single times do not. Every figure is the best of three rounds.
 */

const ROUND_MS = 300;
const require = createRequire(import.meta.url);

function random(seed: number): () => number {
  let state = seed >>> 0;
  return () => {
    state = (state + 0x6d2b79f5) >>> 0;
    let t = Math.imul(state ^ (state >>> 15), state | 1);
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61);
    return ((t ^ (t >>> 14)) >>> 0) / 4_294_967_296;
  };
}

/** Operations a second, the best of three rounds. */
function rate(operations: number, run: () => void): number {
  let best = 0;
  for (let round = 0; round < 3; round++) {
    const startedMs = performance.now();
    let done = 0;
    do {
      run();
      done += operations;
    } while (performance.now() - startedMs < ROUND_MS);
    best = Math.max(best, (1000 * done) / (performance.now() - startedMs));
  }
  return best;
}

const plain = (value: number | undefined) =>
  value === undefined ? "-" : Math.round(value).toLocaleString("en-GB");

function table(title: string, columns: readonly string[], rows: readonly (readonly string[])[]): void {
  const widths = columns.map((column, i) =>
    Math.max(column.length, ...rows.map((row) => row[i]?.length ?? 0)),
  );
  const line = (cells: readonly string[]) =>
    cells
      .map((cell, i) => (i === 0 ? cell.padEnd(widths[i] ?? 0) : cell.padStart(widths[i] ?? 0)))
      .join("  ");
  console.log(`\n${title}\n${line(columns)}`);
  for (const row of rows) console.log(line(row));
}

type Pair = readonly [Rings, Rings];

/** A star with vertices at random radii: rough outlines as hands and thresholds make them. */
function star(next: () => number, vertices: number, roughness: number): Rings {
  const centre: Point = [100 + 40 * next(), 100 + 40 * next()];
  const ring = Array.from({ length: vertices }, (_, i): Point => {
    const angle = (2 * Math.PI * (i + 0.8 * next())) / vertices;
    const radius = 50 * (1 - roughness * next());
    return [centre[0] + radius * Math.cos(angle), centre[1] + radius * Math.sin(angle)];
  });
  return [ring];
}

/**
 * The pairs that consensus compares: five people outline the same objects with a hand's jitter, one of five by a box, and
 * every pair of outlines of one image whose boxes meet is compared. Outlines of ../shared/data/coco-by where present, else
 * stars of 8 to 40 vertices.
 */
function consensusMix(): { pairs: Pair[]; origin: string } {
  const next = random(11);
  const file = path.resolve(import.meta.dirname, "../../../shared/data/coco-by/instances.json");
  const scenes = existsSync(file)
    ? scenesOf(file)
    : Array.from({ length: 40 }, () =>
        Array.from({ length: 8 }, () => star(next, 8 + Math.floor(32 * next()), 0.3)),
      );
  const pairs: Pair[] = [];
  for (const objects of scenes) {
    const drawn: Rings[] = [];
    for (let person = 0; person < 5; person++) {
      for (const rings of objects) {
        const [, , width, height] = boxOfRings(rings);
        const jitter = 0.03 * Math.sqrt(width * height);
        const moved = rings.map((ring) =>
          ring.map(([x, y]): Point => [x + jitter * (2 * next() - 1), y + jitter * (2 * next() - 1)]),
        );
        drawn.push(next() < 0.2 ? [ringOfBox(boxOfRings(moved))] : moved);
      }
    }
    for (const [i, j] of candidatePairs(drawn.map(boxOfRings))) pairs.push([drawn[i] ?? [], drawn[j] ?? []]);
  }
  // Every k-th, so that a round stays short and all scenes are there.
  const step = Math.max(1, Math.floor(pairs.length / 2000));
  return {
    pairs: pairs.filter((_, i) => i % step === 0),
    origin: existsSync(file) ? "outlines of coco-by" : "stars",
  };
}

function scenesOf(file: string): Rings[][] {
  const coco = JSON.parse(readFileSync(file, "utf8")) as {
    annotations: { image_id: number; segmentation: unknown }[];
  };
  const scenes = new Map<number, Rings[]>();
  for (const { image_id: image, segmentation } of coco.annotations) {
    if (!Array.isArray(segmentation)) continue;
    const rings = segmentation.map((flat: number[]) =>
      Array.from({ length: flat.length / 2 }, (_, i): Point => [flat[2 * i] ?? 0, flat[2 * i + 1] ?? 0]),
    );
    scenes.set(image, [...(scenes.get(image) ?? []), rings]);
  }
  return [...scenes.values()];
}

type Engine = {
  name: string;
  prepare: (rings: Rings) => unknown;
  iou: (a: unknown, b: unknown) => number;
  areas: boolean;
};

/** The parts of clipper2-wasm that are used here. */
type WasmPaths = { push_back: (path: WasmPath) => void; delete: () => void };
type WasmPath = { delete: () => void };
type Wasm = {
  PathsD: new () => WasmPaths;
  FillRule: { EvenOdd: unknown };
  MakePathD: (flat: number[]) => WasmPath;
  IntersectD: (a: WasmPaths, b: WasmPaths, rule: unknown, decimals: number) => WasmPaths;
  UnionSelfD: (a: WasmPaths, rule: unknown, decimals: number) => WasmPaths;
  AreaPathsD: (paths: WasmPaths) => number;
};

async function loadWasm(): Promise<Wasm> {
  const factory = require("clipper2-wasm/dist/umd/clipper2z.js") as (options: object) => Promise<Wasm>;
  return factory({ locateFile: (file: string) => require.resolve(`clipper2-wasm/dist/umd/${file}`) });
}

/** Each engine prepares a shape once, as a program that compares it often would, and then compares pairs. */
async function engines(): Promise<Engine[]> {
  const wasm = await loadWasm();
  const iouOf = (common: number, a: number, b: number) => (common > 0 ? common / (a + b - common) : 0);
  return [
    { name: "ours", areas: true, prepare: prepareRings, iou: (a, b) => regionIou(a as never, b as never) },
    {
      name: "clipper2-wasm",
      areas: true,
      prepare: (rings) => {
        const paths = new wasm.PathsD();
        for (const ring of rings) {
          const made = wasm.MakePathD(ring.flat());
          paths.push_back(made);
          made.delete();
        }
        const simple = wasm.UnionSelfD(paths, wasm.FillRule.EvenOdd, 6);
        const area = wasm.AreaPathsD(simple);
        simple.delete();
        return { paths, area, box: boxOfRings(rings) };
      },
      iou: (p, q) => {
        const [a, b] = [p, q] as { paths: WasmPaths; area: number; box: never }[];
        if (!a || !b || boxIntersectionArea(a.box, b.box) === 0) return 0;
        const common = wasm.IntersectD(a.paths, b.paths, wasm.FillRule.EvenOdd, 6);
        const area = wasm.AreaPathsD(common);
        common.delete();
        return iouOf(area, a.area, b.area);
      },
    },
    {
      name: "clipper2-ts",
      areas: true,
      prepare: (rings) => {
        const paths = rings.map((ring) => ring.map(([x, y]) => ({ x, y })));
        return {
          paths,
          area: Clipper.areaPathsD(Clipper.booleanOpD(ClipType.Union, paths, [], FillRule.EvenOdd, 6)),
          box: boxOfRings(rings),
        };
      },
      iou: (p, q) => {
        const [a, b] = [p, q] as { paths: never; area: number; box: never }[];
        if (!a || !b || boxIntersectionArea(a.box, b.box) === 0) return 0;
        return iouOf(
          Clipper.areaPathsD(
            Clipper.booleanOpD(ClipType.Intersection, a.paths, b.paths, FillRule.EvenOdd, 6),
          ),
          a.area,
          b.area,
        );
      },
    },
    {
      name: "polygon-clipping",
      areas: true,
      prepare: (rings) => ({
        shape: rings.map((ring) => [ring.map(([x, y]): [number, number] => [x, y])]),
        area: ringsArea(rings),
        box: boxOfRings(rings),
      }),
      iou: (p, q) => {
        const [a, b] = [p, q] as { shape: never; area: number; box: never }[];
        if (!a || !b || boxIntersectionArea(a.box, b.box) === 0) return 0;
        const common = polygonClipping.intersection(a.shape, b.shape);
        return iouOf(ringsArea(common.flat() as unknown as Rings), a.area, b.area);
      },
    },
  ];
}

async function polygons(): Promise<void> {
  const { pairs, origin } = consensusMix();
  const next = random(5);
  const sets: { name: string; pairs: Pair[] }[] = [
    { name: `consensus mix (${origin}, ${pairs.length} pairs)`, pairs },
  ];
  for (const vertices of [10, 50, 200]) {
    sets.push({
      name: `${vertices} vertices, rough`,
      pairs: Array.from(
        { length: 60 },
        () => [star(next, vertices, 0.5), star(next, vertices, 0.5)] as const,
      ),
    });
    sets.push({
      name: `${vertices} vertices, smooth`,
      pairs: Array.from(
        { length: 60 },
        () => [star(next, vertices, 0.1), star(next, vertices, 0.1)] as const,
      ),
    });
  }
  const all = await engines();
  for (const once of [false, true]) {
    const rows = sets.map(({ name, pairs: list }) => {
      const rates = all.map((engine) => {
        try {
          if (once)
            return rate(list.length, () =>
              list.forEach(([a, b]) =>
                engine.name === "ours" ? ringsIou(a, b) : comparedOnce(engine, a, b),
              ),
            );
          const prepared = list.map(([a, b]) => [engine.prepare(a), engine.prepare(b)] as const);
          return rate(list.length, () => prepared.forEach(([a, b]) => engine.iou(a, b)));
        } catch {
          return undefined;
        }
      });
      const best = Math.max(...rates.slice(1).map((value) => value ?? 0));
      return [name, ...rates.map(plain), `${((rates[0] ?? 0) / best).toFixed(2)} x`];
    });
    table(
      once
        ? "Polygon IoU, shapes compared once, pairs/s"
        : "Polygon IoU, shapes prepared once and compared often (as consensus does), pairs/s",
      ["", ...all.map(({ name }) => name), "ours / best other"],
      rows,
    );
  }
  const { cases } = golden<{ kind: string; a: Rings; b: Rings; evenodd: { iou: number } }>(
    "geometry",
    "polygon_iou",
  );
  const rows = all.map((engine) => {
    let wrong = 0;
    let thrown = 0;
    let worst = 0;
    for (const { kind, a, b, evenodd } of cases) {
      try {
        const error = Math.abs(engine.iou(engine.prepare(a), engine.prepare(b)) - evenodd.iou);
        worst = Math.max(worst, error);
        if (!(error <= (kind === "sliver" || kind === "selfx" ? 1e-6 : 1e-9))) wrong++;
      } catch {
        thrown++;
      }
    }
    return [engine.name, String(cases.length), String(wrong), String(thrown), worst.toExponential(1)];
  });
  table(
    "Against exact rational arithmetic (tests/golden/geometry/polygon_iou.json)",
    ["", "pairs", "outside tolerance", "thrown", "largest error"],
    rows,
  );
}

function comparedOnce(engine: Engine, a: Rings, b: Rings): number {
  const [p, q] = [engine.prepare(a), engine.prepare(b)];
  const iou = engine.iou(p, q);
  for (const made of [p, q] as { paths?: { delete?: () => void } }[]) made.paths?.delete?.();
  return iou;
}

const MASK_IMAGE = { width: 1200, height: 1000 };

function masks(): void {
  const next = random(3);
  const rows = [50, 200, 800].map((size) => {
    const shapes = Array.from({ length: 60 }, () => blob(next, size));
    const drawn = shapes.map((rings) => rasteriseRings(rings, MASK_IMAGE.width, MASK_IMAGE.height));
    const codes = drawn.map((mask) => rleFromMask(mask, MASK_IMAGE.width, MASK_IMAGE.height));
    const runs = codes.map(prepareRle);
    const pairs = shapes.length ** 2;
    const bits = rate(pairs, () => drawn.forEach((a) => drawn.forEach((b) => maskIou(a, b))));
    const merged = rate(pairs, () => runs.forEach((a) => runs.forEach((b) => rleIou(a, b))));
    const reference = cocoReference(codes.map(rleToString), MASK_IMAGE);
    return [
      `${size} px`,
      plain(bits),
      plain(merged),
      reference === undefined ? "absent" : plain(reference),
      reference === undefined ? "-" : `${(Math.max(bits, merged) / reference).toFixed(2)} x`,
      plain(
        rate(shapes.length, () =>
          shapes.forEach((rings) => rasteriseRings(rings, MASK_IMAGE.width, MASK_IMAGE.height)),
        ),
      ),
      plain(rate(drawn.length, () => drawn.forEach((mask) => traceMask(mask)))),
      plain(rate(20, () => drawn.slice(0, 20).forEach((mask) => simplifyRings(traceMask(mask), 0.02)))),
    ];
  });
  table(
    "Masks: IoU of a 60 x 60 matrix in pairs/s (reference: COCO API in C through python3-pycocotools, same matrix), then shapes/s",
    [
      "object",
      "bits",
      "run lengths",
      "reference C",
      "ours / reference",
      "rasterise",
      "trace",
      "trace + simplify 2 %",
    ],
    rows,
  );
  const outlines = Array.from({ length: 50 }, () =>
    traceMask(rasteriseRings(blob(next, 200), MASK_IMAGE.width, MASK_IMAGE.height)),
  );
  const kept = outlines.map((rings) => simplifyRings(rings, 0.02));
  const mean = (values: number[]) => values.reduce((sum, value) => sum + value, 0) / values.length;
  console.log(
    `Simplified outlines of 200 px objects: ${mean(outlines.map((r) => r.flat().length)).toFixed(0)} vertices become ${mean(kept.map((r) => r.flat().length)).toFixed(1)}, mean IoU kept ${mean(kept.map((r, i) => ringsIou(r, outlines[i] ?? []))).toFixed(4)}`,
  );
}

/** An object of about this size at a random place of the image. */
function blob(next: () => number, size: number): Rings {
  const centre: Point = [
    size / 2 + next() * (MASK_IMAGE.width - size),
    size / 2 + next() * (MASK_IMAGE.height - size),
  ];
  const waves = [1, 2, 3, 4, 5].map((k) => ({ k, phase: 2 * Math.PI * next(), height: 0.12 * next() }));
  return [
    Array.from({ length: 60 }, (_, i): Point => {
      const angle = (2 * Math.PI * i) / 60;
      const radius =
        (size / 2) *
        waves.reduce((sum, { k, phase, height }) => sum + height * Math.cos(k * angle + phase), 0.8);
      return [centre[0] + radius * Math.cos(angle), centre[1] + radius * Math.sin(angle)];
    }),
  ];
}

const PYTHON = "python3";

/** Pairs a second of the reference's matrix, or undefined where it is not installed. */
function cocoReference(counts: readonly string[], { width, height }: typeof MASK_IMAGE): number | undefined {
  const script = `
import json, sys, time
from pycocotools import mask
data = json.load(sys.stdin)
codes = [{"size": [${height}, ${width}], "counts": c.encode()} for c in data]
best = 0
for _ in range(3):
    start = time.perf_counter(); done = 0
    while time.perf_counter() - start < 0.3:
        mask.iou(codes, codes, [0] * len(codes)); done += len(codes) ** 2
    best = max(best, done / (time.perf_counter() - start))
print(best)`;
  return python(script, JSON.stringify(counts));
}

function python(script: string, input: string): number | undefined {
  const run = spawnSync(process.env.BENCH_PYTHON ?? PYTHON, ["-c", script], {
    input,
    encoding: "utf8",
    maxBuffer: 1 << 26,
  });
  return run.status === 0 ? Number(run.stdout.trim()) : undefined;
}

/** Shapely on the consensus mix, and OpenCV's filling, where Debian's packages are present. */
function references(): void {
  const { pairs } = consensusMix();
  const shapely = python(
    `
import json, sys, time
from shapely.geometry import Polygon, MultiPolygon
from shapely.validation import make_valid
def shape(rings):
    return make_valid(MultiPolygon([Polygon(r) for r in rings])) if len(rings) > 1 else make_valid(Polygon(rings[0]))
pairs = [(shape(a), shape(b)) for a, b in json.load(sys.stdin)]
best = 0
for _ in range(3):
    start = time.perf_counter()
    for a, b in pairs:
        i = a.intersection(b).area; i / (a.area + b.area - i)
    best = max(best, len(pairs) / (time.perf_counter() - start))
print(best)`,
    JSON.stringify(pairs),
  );
  const next = random(3);
  const shapes = Array.from({ length: 60 }, () => blob(next, 200)[0] ?? []);
  const filling = python(
    `
import json, sys, time
import cv2, numpy as np
shapes = [np.array(s).round().astype(np.int32) for s in json.load(sys.stdin)]
best = 0
for _ in range(3):
    start = time.perf_counter(); done = 0
    while time.perf_counter() - start < 0.3:
        for s in shapes:
            x, y, w, h = cv2.boundingRect(s)
            cv2.fillPoly(np.zeros((h, w), np.uint8), [s], 1, offset=(-x, -y))
        done += len(shapes)
    best = max(best, done / (time.perf_counter() - start))
print(best)`,
    JSON.stringify(shapes),
  );
  table(
    "References through Python",
    ["", "per second"],
    [
      [
        "shapely (GEOS), prepared pairs of the consensus mix",
        shapely === undefined ? "absent: python3-shapely" : plain(shapely),
      ],
      [
        "OpenCV fillPoly, objects of 200 px",
        filling === undefined ? "absent: python3-opencv" : plain(filling),
      ],
    ],
  );
}

function checkArea(): void {
  const rings = blob(random(1), 200);
  const relative = Math.abs(
    maskArea(rasteriseRings(rings, MASK_IMAGE.width, MASK_IMAGE.height)) / ringsArea(rings) - 1,
  );
  if (relative > 0.01)
    throw new Error("rasterised and exact area disagree: the bench would compare nonsense");
}

checkArea();
console.log(
  `Node ${process.version}, one core of ${execFileSync("uname", ["-m"], { encoding: "utf8" }).trim()}`,
);
await polygons();
masks();
references();
