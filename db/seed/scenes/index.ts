import sharp from "sharp";
import { maskFromBytes } from "@/lib/geometry/mask";
import { simplifyRings } from "@/lib/geometry/simplify";
import { traceMask } from "@/lib/geometry/trace";
import { ringsArea } from "@/lib/geometry/region";
import type { Box, Point, Rings } from "@/lib/geometry/types";
import { Canvas, mix, type Light, type Rgb } from "./canvas";
import { fractal, noise, randomFrom, type Random } from "./noise";
import { bottle, can, cap, float, leaf, pebble, rope, weed, type Place } from "./things";

export type SceneInstance = {
  className: string;
  box: Box;
  rings: Rings;
  /** Share of the object that nothing lies on, 0..1. */
  visibleFraction: number;
  occluded: boolean;
};

export type Scene = {
  raster: { width: number; height: number; data: Uint8Array };
  width: number;
  height: number;
  instances: SceneInstance[];
};

export type SceneOptions = {
  batch: "wrack-line" | "glasshouse";
  seed: number;
  width?: number;
  height?: number;
};

/** Objects of which less is seen, in px² or as a share, are no truth: nobody could be asked to find them. */
const VISIBLE_MIN_PX2 = 120;
const VISIBLE_MIN_SHARE = 0.12;
/** Outlines are simplified by no more than this loss of IoU. */
const IOU_LOSS_MAX = 0.004;

/** A rendered scene with the exact visible outline of each object. The same seed gives the same bytes. */
export function renderScene({ batch, seed, width = 1280, height = 960 }: SceneOptions): Scene {
  const canvas = new Canvas(width, height);
  const random = randomFrom(seed * 7919 + (batch === "glasshouse" ? 17 : 3));
  const names = batch === "glasshouse" ? paintTrays(canvas, random, seed) : paintShore(canvas, random, seed);
  const data = canvas.shade(lightOf(random, batch), seed);
  return { raster: { width, height, data }, width, height, instances: truthOf(canvas, names) };
}

/** The scene as a JPEG. */
export function encodeJpeg(scene: Scene): Promise<Buffer> {
  const { data, width, height } = scene.raster;
  return sharp(data, { raw: { width, height, channels: 3 } })
    .blur(0.55)
    .jpeg({ quality: 90, chromaSubsampling: "4:4:4" })
    .toBuffer();
}

const LIGHTS: readonly Omit<Light, "angle">[] = [
  { elevation: 1.05, sun: [0.85, 0.82, 0.76], sky: [0.26, 0.29, 0.33], shadow: 0.85 }, // noon
  { elevation: 0.55, sun: [1.02, 0.86, 0.64], sky: [0.2, 0.23, 0.3], shadow: 0.9 }, // low sun
  { elevation: 1.2, sun: [0.4, 0.41, 0.43], sky: [0.5, 0.52, 0.55], shadow: 0.35 }, // overcast
  { elevation: 0.4, sun: [0.8, 0.55, 0.4], sky: [0.22, 0.22, 0.34], shadow: 0.8 }, // dusk
];

function lightOf(random: Random, batch: SceneOptions["batch"]): Light {
  const angle = random() * 2 * Math.PI;
  const index = batch === "glasshouse" ? (random() < 0.6 ? 2 : 0) : Math.floor(random() * LIGHTS.length);
  return { angle, ...(LIGHTS[index] ?? LIGHTS[0]!) };
}

/** Sand, water's edge and wrack line with litter among weed and pebbles. Returns the class of each object. */
function paintShore(canvas: Canvas, random: Random, seed: number): string[] {
  const { width, heightPx: height } = canvas;
  const tilt = (random() - 0.5) * 0.35;
  const waterAt = random() < 0.7 ? 0.06 + random() * 0.16 : -1;
  const wrackAt = 0.45 + (random() - 0.5) * 0.2;
  const dry: Rgb = mix([0.62, 0.52, 0.37], [0.7, 0.62, 0.48], random());
  const edge = (x: number) =>
    waterAt * height + tilt * (x - width / 2) * 0.4 + (fractal(x * 0.006, 3, seed, 3) - 0.5) * 90;
  const line = (x: number) =>
    wrackAt * height + tilt * (x - width / 2) + (fractal(x * 0.005, 9, seed + 4, 3) - 0.5) * 170;
  const shoreAt = Float32Array.from({ length: width + 1 }, (_, x) => edge(x));
  const sand = (x: number, y: number) =>
    fractal(x * 0.35, y * 0.35, seed + 5, 3) * 1.4 + fractal(x * 0.02, y * 0.02, seed + 6, 2) * 5;
  const water = (x: number, y: number) => fractal(x * 0.03, y * 0.03, seed + 8, 3) * 2.2;
  const isWater = (x: number, y: number) => waterAt > 0 && y < (shoreAt[x] ?? 0);
  canvas.ground(
    (x, y) => (isWater(x, y) ? water(x, y) : sand(x, y)),
    (x, y) => {
      const shore = shoreAt[x] ?? 0;
      const wet = Math.max(0, Math.min(1, (shore + 210 - y) / 190));
      if (isWater(x, y)) {
        const depth = Math.min(1, (shore - y) / 120);
        const wave = Math.sin(y * 0.09 + fractal(x * 0.01, y * 0.02, seed, 3) * 9);
        const foam = fractal(x * 0.05, y * 0.06, seed + 2, 4) + Math.max(0, 1 - (shore - y) / 26) * 0.35;
        const colour = mix(
          mix([0.4, 0.36, 0.26], [0.16, 0.25, 0.26], depth),
          [0.93, 0.94, 0.93],
          foam > 0.68 ? Math.min(1, (foam - 0.68) * 6) : 0,
        );
        return { height: 0, nx: 0, ny: wave * 0.12, colour, gloss: 0.6 };
      }
      const ripple = Math.sin((y + tilt * x) * 0.16 + fractal(x * 0.012, y * 0.012, seed, 3) * 11) * 0.16;
      const speck = noise(x * 0.9, y * 0.9, seed + 1);
      const grains = speck > 0.93 ? 0.35 : speck < 0.06 ? -0.3 : 0;
      const tone = fractal(x * 0.008, y * 0.008, seed + 3, 4);
      const colour = mix(
        mix(dry, [0.34, 0.27, 0.18], 0.75 * wet),
        grains > 0 ? [0.9, 0.86, 0.8] : [0.2, 0.17, 0.13],
        Math.abs(grains) * 0.6 + tone * 0.12,
      );
      return { height: 0, nx: 0, ny: ripple * (1 - wet * 0.5), colour, gloss: 0.5 * wet };
    },
  );
  const scaleAt = (y: number) => 0.62 + 0.62 * (y / height);
  const onLine = (spread: number): Place => {
    const x = 40 + random() * (width - 80);
    const y = Math.min(height - 30, Math.max(30, line(x) + (random() + random() + random() - 1.5) * spread));
    return { x, y, angle: random() * 2 * Math.PI, scale: scaleAt(y) };
  };
  for (let i = 0; i < 260; i++) {
    const y = Math.max(0, edge(0) + 40) + random() * (height - edge(0) - 60);
    pebble(
      canvas,
      { x: random() * width, y, angle: random() * 6.28, scale: scaleAt(y) * (0.4 + random() * 0.7) },
      random,
    );
  }
  for (let i = 0; i < 70; i++) weed(canvas, onLine(170), random);
  const names: string[] = [""];
  const count = 8 + Math.floor(random() * 12);
  const kinds = [
    ["bottle", bottle, 0.28],
    ["cap", cap, 0.22],
    ["rope", rope, 0.18],
    ["float", float, 0.15],
    ["can", can, 0.17],
  ] as const;
  for (let i = 0; i < count; i++) {
    let at = random();
    const kind = kinds.find(([, , share]) => (at -= share) < 0) ?? kinds[0];
    const place = onLine(290);
    // Some lie on another: the neighbour's place, moved by a hand's breadth.
    names.push(kind[0]);
    kind[1](canvas, place, names.length - 1, random);
    if (random() < 0.4)
      weed(
        canvas,
        { ...place, x: place.x + (random() - 0.5) * 60, y: place.y + (random() - 0.5) * 40 },
        random,
      );
    if (random() < 0.22) {
      names.push("cap");
      cap(
        canvas,
        {
          ...place,
          x: place.x + (random() - 0.5) * 110 * place.scale,
          y: place.y + (random() - 0.5) * 80 * place.scale,
        },
        names.length - 1,
        random,
      );
    }
  }
  for (let i = 0; i < 16; i++) weed(canvas, onLine(200), random);
  return names;
}

/** Trays of compost cells with seedlings of varied growth; some cells are empty. */
function paintTrays(canvas: Canvas, random: Random, seed: number): string[] {
  const { width, heightPx: height } = canvas;
  const columns = 5 + Math.floor(random() * 2);
  const rows = Math.round((columns * height) / width);
  const cellX = width / columns;
  const cellY = height / rows;
  const rib = 11;
  const jitter = [random() * 14 - 7, random() * 14 - 7] as const;
  const soil = (x: number, y: number) => fractal(x * 0.16, y * 0.16, seed + 3, 3) * 4.2;
  canvas.ground(soil, (x, y) => {
    const u = (((x + jitter[0]) % cellX) + cellX) % cellX;
    const v = (((y + jitter[1]) % cellY) + cellY) % cellY;
    const toWall = Math.min(u, cellX - u, v, cellY - v);
    if (toWall < rib) {
      const side = toWall < rib * 0.75 ? 0 : 1.4;
      const across = Math.min(u, cellX - u) < Math.min(v, cellY - v);
      return {
        height: 12,
        nx: across ? (u < cellX / 2 ? side : -side) : 0,
        ny: across ? 0 : v < cellY / 2 ? side : -side,
        colour: [0.07, 0.075, 0.08],
        gloss: 0.5,
      };
    }
    const speck = noise(x * 0.22, y * 0.22, seed + 5);
    const tone = fractal(x * 0.05, y * 0.05, seed + 2, 4);
    const tint = mix([0.09, 0.06, 0.04], [0.24, 0.16, 0.1], tone);
    const isPerlite = speck > 0.9 && noise(x * 0.06, y * 0.06, seed + 9) > 0.5;
    return {
      height: isPerlite ? 3 : 0,
      nx: 0,
      ny: 0,
      colour: isPerlite ? [0.82, 0.8, 0.76] : tint,
      gloss: 0.03,
    };
  });
  const names: string[] = [""];
  for (let row = 0; row < rows; row++) {
    for (let column = 0; column < columns; column++) {
      const x = (column + 0.5) * cellX - jitter[0];
      const y = (row + 0.5) * cellY - jitter[1];
      if (random() < 0.16) {
        names.push("empty cell");
        continue;
      }
      names.push("seedling");
      seedling(
        canvas,
        {
          x: x + (random() - 0.5) * cellX * 0.3,
          y: y + (random() - 0.5) * cellY * 0.3,
          angle: random() * 6.28,
          scale: Math.min(cellX, cellY) / 190,
        },
        names.length - 1,
        random,
      );
    }
  }
  // Empty cells have no relief of their own: their truth is the cell between the ribs.
  names.forEach((name, index) => {
    if (name !== "empty cell") return;
    const row = Math.floor((index - 1) / columns);
    const column = (index - 1) % columns;
    const left = Math.round(column * cellX - jitter[0] + rib);
    const top = Math.round(row * cellY - jitter[1] + rib);
    for (let py = Math.max(0, top); py < Math.min(height, top + cellY - 2 * rib); py++) {
      for (let px = Math.max(0, left); px < Math.min(width, left + cellX - 2 * rib); px++) {
        const i = py * width + px;
        if (canvas.owner[i] === 0) canvas.owner[i] = index;
      }
    }
  });
  return names;
}

function seedling(canvas: Canvas, place: Place, owner: number, random: Random): void {
  const vigour = 0.6 + random() * 0.65;
  const tone = mix([0.2, 0.42, 0.12], [0.36, 0.52, 0.16], random());
  const pairs = 1 + Math.floor(random() * 2.6);
  for (let pair = 0; pair < pairs; pair++) {
    const size = (pair === 0 ? 30 : 42 + 8 * pair) * vigour;
    for (const side of [0, Math.PI]) {
      const angle = place.angle + side + pair * 1.45 + (random() - 0.5) * 0.4;
      leaf(canvas, { ...place, angle }, owner, {
        length: size,
        breadth: size * (pair === 0 ? 0.3 : 0.26),
        tone: mix(tone, [0.45, 0.6, 0.22], pair === 0 ? 0.25 : 0.08 * pair),
      });
    }
  }
}

/** The visible mask of each object, traced: its outline, box and how much of it is seen. */
function truthOf(canvas: Canvas, names: readonly string[]): SceneInstance[] {
  const { width, heightPx, owner } = canvas;
  type Extent = { seen: number; left: number; top: number; right: number; bottom: number };
  const extents = new Map<number, Extent>();
  for (let y = 0; y < heightPx; y++) {
    for (let x = 0; x < width; x++) {
      const own = owner[y * width + x]!;
      if (own <= 0) continue;
      const extent = extents.get(own) ?? { seen: 0, left: x, top: y, right: x, bottom: y };
      extent.seen += 1;
      extent.left = Math.min(extent.left, x);
      extent.right = Math.max(extent.right, x);
      extent.bottom = y;
      extents.set(own, extent);
    }
  }
  return names.flatMap((className, number): SceneInstance[] => {
    const extent = extents.get(number);
    if (number === 0 || !extent) return [];
    const { seen, left, top, right, bottom } = extent;
    const visibleFraction = seen / Math.max(seen, canvas.full[number] ?? seen);
    if (seen < VISIBLE_MIN_PX2 || visibleFraction < VISIBLE_MIN_SHARE) return [];
    const [w, h] = [right - left + 1, bottom - top + 1];
    const bytes = new Uint8Array(w * h);
    for (let y = 0; y < h; y++) {
      for (let x = 0; x < w; x++) if (owner[(top + y) * width + left + x] === number) bytes[y * w + x] = 1;
    }
    const traced = traceMask(maskFromBytes(bytes, w, h), 8).filter((ring) => ringsArea([ring]) >= 12);
    const rings = simplifyRings(traced, IOU_LOSS_MAX).map((ring) =>
      ring.map(([x, y]): Point => [x + left, y + top]),
    );
    return [{ className, box: [left, top, w, h], rings, visibleFraction, occluded: visibleFraction < 0.9 }];
  });
}
