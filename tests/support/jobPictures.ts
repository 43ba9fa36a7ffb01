import { readFileSync } from "node:fs";
import path from "node:path";
import sharp from "sharp";
import type { Box, Point } from "@/lib/geometry/types";

/** A test picture with its exact truth, in px of the upright image. */
export type TestPicture = {
  name: string;
  bytes: Buffer;
  width: number;
  height: number;
  truth: { kind: "pebble" | "coin"; box: Box; ring: Point[] }[];
};

/** Small linear congruential generator (Numerical Recipes): the same pictures on every machine. */
function random(seed: number): () => number {
  let state = seed >>> 0;
  return () => {
    state = (Math.imul(state, 1664525) + 1013904223) >>> 0;
    return state / 2 ** 32;
  };
}

const WIDTH = 640;
const HEIGHT = 480;
const RING_POINTS = 20;
const COLOURS = ["#7a3b2e", "#2f5d73", "#7d7326", "#5a4a6e"];

/** Pebbles on sand, drawn as SVG with grain: simple things of known outline for the tests. */
export async function pebblePicture(name: string, seed: number): Promise<TestPicture> {
  const next = random(seed);
  const truth: TestPicture["truth"] = [];
  const columns = 3;
  for (let cell = 0; cell < 6; cell++) {
    const cx = ((cell % columns) + 0.5) * (WIDTH / columns) + (next() - 0.5) * 40;
    const cy = (Math.floor(cell / columns) + 0.5) * (HEIGHT / 2) + (next() - 0.5) * 40;
    const rx = 38 + next() * 26;
    const ry = 30 + next() * 22;
    const turn = next() * Math.PI;
    const ring = Array.from({ length: RING_POINTS }, (_, n): Point => {
      const angle = (n / RING_POINTS) * 2 * Math.PI;
      const [px, py] = [rx * Math.cos(angle), ry * Math.sin(angle)];
      return [
        Math.round(cx + px * Math.cos(turn) - py * Math.sin(turn)),
        Math.round(cy + px * Math.sin(turn) + py * Math.cos(turn)),
      ];
    });
    const xs = ring.map(([x]) => x);
    const ys = ring.map(([, y]) => y);
    truth.push({
      kind: "pebble",
      ring,
      box: [
        Math.min(...xs),
        Math.min(...ys),
        Math.max(...xs) - Math.min(...xs),
        Math.max(...ys) - Math.min(...ys),
      ],
    });
  }
  const shapes = truth
    .map(
      ({ ring }, index) =>
        `<polygon points="${ring.map((point) => point.join(",")).join(" ")}" fill="${COLOURS[index % COLOURS.length]}"/>`,
    )
    .join("");
  const svg = `<svg xmlns="http://www.w3.org/2000/svg" width="${WIDTH}" height="${HEIGHT}"><rect width="100%" height="100%" fill="#d8c9a3"/>${shapes}</svg>`;
  const noise = Buffer.from(Array.from({ length: WIDTH * HEIGHT * 3 }, () => Math.floor(next() * 24)));
  const grain = await sharp(noise, { raw: { width: WIDTH, height: HEIGHT, channels: 3 } })
    .png()
    .toBuffer();
  const bytes = await sharp(Buffer.from(svg))
    .flatten()
    .composite([{ input: grain, blend: "add" }])
    .jpeg({ quality: 92 })
    .toBuffer();
  return { name, bytes, width: WIDTH, height: HEIGHT, truth };
}

/** The same picture stored lying on its side, with the EXIF orientation (6) that turns it upright, and a place. */
export async function turned(picture: TestPicture): Promise<TestPicture> {
  const bytes = await sharp(picture.bytes)
    .rotate(-90)
    .jpeg({ quality: 92 })
    .withExif({ IFD0: { Make: "Testcam" }, IFD3: { GPSLatitudeRef: "N", GPSLatitude: "51/1 30/1 0/1" } })
    .withMetadata({ orientation: 6 })
    .toBuffer();
  return { ...picture, bytes };
}

/** Coins of a museum, a photograph with 24 known objects; see SOURCE.txt beside it. */
export function coinsPicture(): TestPicture {
  const folder = path.resolve(import.meta.dirname, "photographs");
  const boxes = JSON.parse(readFileSync(path.join(folder, "coins.boxes.json"), "utf8")) as [
    number,
    number,
    number,
    number,
  ][];
  const truth = boxes.map((box): TestPicture["truth"][number] => {
    const [x, y, w, h] = box;
    return {
      kind: "coin",
      box,
      ring: [
        [x, y],
        [x + w, y],
        [x + w, y + h],
        [x, y + h],
      ],
    };
  });
  return {
    name: "coins.png",
    bytes: readFileSync(path.join(folder, "coins.png")),
    width: 384,
    height: 303,
    truth,
  };
}
