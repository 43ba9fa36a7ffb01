import { cameraOf, groundAt, groundBounds } from "./camera";
import type { Material, Surface } from "./film";
import { sunOf, type Light, type Rgb } from "./light";
import { mixed, paint, srgb, stain, varied } from "./materials";
import { pose, posed, sheet } from "./mesh";
import { ball } from "./nature";
import { between, hash, nearZero, pick, wholeBetween, type Random } from "./random";
import { cellCount, Relief } from "./relief";
import { seedling, type Species } from "./seedling";
import type { Painted } from "./shore";
import { Stage } from "./stage";
import { CELL, CLOUD, CLOUD_TOO, GRIT, mix, ramp, tap } from "./texture";

export type GlasshousePlan = {
  seed: number;
  width: number;
  height: number;
  species: readonly [Species, ...Species[]];
};

/** Trays of cells: their pitch and how many cells a tray has, in the trays' own directions. cm. */
type Trays = {
  pitchCm: number;
  columns: number;
  rows: number;
  gapCm: number;
  turn: number;
  shiftX: number;
  shiftY: number;
  seed: number;
};

/** Where a place lies in its tray: the cell, cm from the cell's centre, and cm inside the cell's opening (negative is rim). */
type CellSpot = { column: number; row: number; dx: number; dy: number; inside: number; outsideTray: number };

const CORNER_CM = 1.1;
const BENCH_CM = -1.4;

/** Trays of compost seen from above: seedlings of one age and kind with some cells left empty. */
export function paintGlasshouse(plan: GlasshousePlan, random: Random): Painted {
  const camera = cameraOf(plan.width, plan.height, {
    heightCm: between(random, 50, 60),
    pitch: between(random, 1.34, 1.56),
    roll: nearZero(random) * 0.06,
    fieldOfView: between(random, 0.86, 0.98),
  });
  const [left, near, right, far] = groundBounds(camera);
  const margin = 6;
  const cellCm = Math.sqrt(((right - left + 2 * margin) * (far - near + 2 * margin)) / cellCount(plan));
  const relief = new Relief([left - margin, near - margin, right + margin, far + margin], cellCm);
  const [centreX, centreY] = groundAt(camera, plan.width / 2, plan.height / 2);
  const trays: Trays = {
    pitchCm: between(random, 7.8, 9.4),
    columns: wholeBetween(random, 5, 7),
    rows: wholeBetween(random, 4, 6),
    gapCm: 1.4,
    turn: nearZero(random) * 0.07,
    shiftX: centreX + between(random, -20, 20),
    shiftY: centreY + between(random, -16, 16),
    seed: plan.seed,
  };
  const stage = new Stage(camera, relief);
  relief.shape(trayShape(trays));
  const empties = sow(stage, trays, plan, [left, near, right, far], random);
  const { light, exposure, warmth } = daylight(plan.seed, random);
  relief.settle(sunOf(light));
  relief.finishGround();
  stage.draw();
  stage.film.ground((x, y) => relief.groundAt(x, y), traySurface(relief, trays, empties, random));
  return {
    stage,
    light,
    lens: {
      exposure,
      warmth,
      blurPx: between(random, 0.5, 0.7),
      vignette: between(random, 0.08, 0.22),
      noise: between(random, 0.018, 0.035),
    },
  };
}

function spotIn(
  { pitchCm, columns, rows, gapCm, turn, shiftX, shiftY }: Trays,
  x: number,
  y: number,
  out: CellSpot,
): void {
  const [c, s] = [Math.cos(turn), Math.sin(turn)];
  const u = (x - shiftX) * c + (y - shiftY) * s;
  const v = -(x - shiftX) * s + (y - shiftY) * c;
  const [wide, deep] = [columns * pitchCm + gapCm, rows * pitchCm + gapCm];
  const [trayX, trayY] = [Math.floor(u / wide), Math.floor(v / deep)];
  const inX = u - trayX * wide - gapCm / 2;
  const inY = v - trayY * deep - gapCm / 2;
  const column = Math.min(columns - 1, Math.max(0, Math.floor(inX / pitchCm)));
  const row = Math.min(rows - 1, Math.max(0, Math.floor(inY / pitchCm)));
  out.column = trayX * columns + column;
  out.row = trayY * rows + row;
  out.dx = inX - (column + 0.5) * pitchCm;
  out.dy = inY - (row + 0.5) * pitchCm;
  const half = pitchCm / 2 - 0.42 - CORNER_CM;
  const [ax, ay] = [Math.abs(out.dx) - half, Math.abs(out.dy) - half];
  out.inside = CORNER_CM - Math.hypot(Math.max(0, ax), Math.max(0, ay)) - Math.min(0, Math.max(ax, ay));
  out.outsideTray = Math.max(-inX, inX - columns * pitchCm, -inY, inY - rows * pitchCm);
}

const newSpot = (): CellSpot => ({ column: 0, row: 0, dx: 0, dy: 0, inside: 0, outsideTray: 0 });

/** Centre of a cell on the ground. */
function centreOf(
  { pitchCm, columns, rows, gapCm, turn, shiftX, shiftY }: Trays,
  column: number,
  row: number,
): [number, number] {
  const [trayX, trayY] = [Math.floor(column / columns), Math.floor(row / rows)];
  const u = trayX * (columns * pitchCm + gapCm) + gapCm / 2 + (column - trayX * columns + 0.5) * pitchCm;
  const v = trayY * (rows * pitchCm + gapCm) + gapCm / 2 + (row - trayY * rows + 0.5) * pitchCm;
  return [shiftX + u * Math.cos(turn) - v * Math.sin(turn), shiftY + u * Math.sin(turn) + v * Math.cos(turn)];
}

const levelOf = ({ column, row }: { column: number; row: number }, seed: number) =>
  -0.85 - 0.5 * hash(column, row, seed);

function trayShape(trays: Trays): (x: number, y: number) => number {
  const spot = newSpot();
  return (x, y) => {
    spotIn(trays, x, y, spot);
    if (spot.outsideTray > 0)
      return mix(0, BENCH_CM, ramp(0.08, 0.6, spot.outsideTray)) + 0.05 * tap(GRIT, x * 8, y * 8);
    const rim = 0.1 * ramp(-0.45, -0.1, spot.inside) * ramp(0.05, -0.2, spot.inside);
    if (spot.inside <= 0) return rim;
    const dome = -0.06 * (spot.dx * spot.dx + spot.dy * spot.dy) * 0.08;
    const soil =
      levelOf(spot, trays.seed) +
      dome +
      0.2 * tap(CLOUD, x * 16, y * 16 + trays.seed) +
      0.13 * tap(CLOUD_TOO, x * 46, y * 46) +
      0.05 * tap(GRIT, x * 34, y * 34);
    return Math.max(soil, -spot.inside * 5.5);
  };
}

/** Fills the trays. Returns the object numbers of the empty cells by cell. */
function sow(
  stage: Stage,
  trays: Trays,
  { species, seed }: GlasshousePlan,
  [left, near, right, far]: readonly [number, number, number, number],
  random: Random,
): Map<string, number> {
  const { relief, film, topAt } = stage;
  const kind = species[seed % species.length] ?? species[0];
  const age = between(random, 0.15, 0.85);
  const emptyShare = between(random, 0.08, 0.22);
  const empties = new Map<string, number>();
  const isInFrame = (x: number, y: number) => {
    const { camera } = film;
    const [dx, dy, dz] = [x - camera.eye[0], y - camera.eye[1], -camera.eye[2]];
    const along = (axis: readonly number[]) =>
      dx * (axis[0] ?? 0) + dy * (axis[1] ?? 0) + dz * (axis[2] ?? 0);
    const depth = along(camera.forward);
    const [px, py] = [
      camera.width / 2 + (camera.focalPx * along(camera.right)) / depth,
      camera.height / 2 - (camera.focalPx * along(camera.up)) / depth,
    ];
    return px > 0 && py > 0 && px < camera.width && py < camera.height;
  };
  const reach = 14;
  const late: (() => void)[] = [];
  for (let row = -reach; row <= reach; row++) {
    for (let column = -reach; column <= reach; column++) {
      const [x, y] = centreOf(trays, column, row);
      if (x < left - 5 || x > right + 5 || y < near - 5 || y > far + 5) continue;
      const z = relief.groundAt(x, y);
      const isLabelled = isInFrame(x, y);
      if (random() < emptyShare) {
        const number = isLabelled ? stage.numberFor("empty cell") : 0;
        if (isLabelled) empties.set(`${column},${row}`, number);
        crumbs(stage, x, y, trays.pitchCm, number, random);
        if (random() < 0.12) stage.add(tag(x, y, z, random));
        continue;
      }
      crumbs(stage, x, y, trays.pitchCm, 0, random);
      const growth = Math.min(1, Math.max(0.02, age + nearZero(random) * 0.4 - (random() < 0.12 ? 0.35 : 0)));
      const count = random() < 0.07 ? 2 : 1;
      for (let i = 0; i < count; i++) {
        const [px, py] = [x + nearZero(random) * 1.5, y + nearZero(random) * 1.5];
        late.push(() =>
          stage.add(
            seedling(px, py, topAt(px, py), kind, growth, random),
            isLabelled ? "seedling" : undefined,
          ),
        );
      }
    }
  }
  for (const plant of late) plant();
  return empties;
}

/** Perlite and bark on the compost of a cell; in an empty cell they are part of it. */
function crumbs(stage: Stage, x: number, y: number, pitchCm: number, owner: number, random: Random): void {
  const half = pitchCm / 2 - 1;
  for (let i = wholeBetween(random, 8, 22); i > 0; i--) {
    const isPerlite = random() < 0.62;
    const [px, py] = [x + between(random, -half, half), y + between(random, -half, half)];
    const size = isPerlite ? between(random, 0.06, 0.2) : between(random, 0.1, 0.35);
    const colour = isPerlite
      ? varied(PERLITE, 0.1, random)
      : varied(mixed(BARK, BARK_PALE, random()), 0.3, random);
    const shift = random() * 512;
    const material: Material = ({ x: lx, y: ly, z }, surface) => {
      const light = 1 + 0.2 * tap(CLOUD, lx * 20 + shift, ly * 20 + z * 9);
      paint(surface, [colour[0] * light, colour[1] * light, colour[2] * light]);
      surface.gloss = 0.05;
    };
    const flat = isPerlite ? 0.8 : 0.35;
    stage.addTo(
      [
        {
          mesh: ball(
            px,
            py,
            stage.topAt(px, py) + size * 0.2,
            [size, size * between(random, 0.5, 0.9), size * flat],
            random() * 3.14,
            8,
            10,
            random,
            0.3,
          ),
          material,
          isClear: false,
          isCounted: true,
        },
      ],
      owner,
    );
  }
}

const PERLITE = srgb(0xd9d6cd);
const BARK = srgb(0x3d2818);
const BARK_PALE = srgb(0x7a5a3a);

/** A white plant label stuck into the compost, with lines of pencil on it. */
function tag(x: number, y: number, z: number, random: Random) {
  const colour = pick([srgb(0xe8e6df), srgb(0xe8e6df), srgb(0xe2c843), srgb(0x8fb7d6)], random);
  const mesh = sheet(12, 4, false, (u, v, out) => {
    const side = v * 2 - 1;
    out[0] = u * 6.5;
    out[1] = side * 0.75 * Math.min(1, 0.25 + u * 5);
    out[2] = 0.12 * u * u;
  });
  const seed = wholeBetween(random, 0, 999);
  const material: Material = ({ u, v }, surface) => {
    paint(surface, colour);
    const line =
      Math.abs(v - 0.5) < 0.2 &&
      u > 0.4 &&
      u < 0.92 &&
      Math.abs(v - 0.5 - 0.16 * tap(CLOUD, u * 300 + seed, seed)) < 0.035;
    if (line) stain(surface, [0.08, 0.08, 0.1], 0.8);
    surface.gloss = 0.35;
  };
  const turn = random() * 6.283;
  const placed = posed(
    mesh,
    pose(x - Math.cos(turn) * 2, y - Math.sin(turn) * 2, z - 0.3, {
      yaw: turn,
      pitch: between(random, 0.25, 0.6),
      roll: nearZero(random) * 0.3,
    }),
  );
  return [{ mesh: placed, material, isClear: false }];
}

const PLASTICS: readonly [Rgb, ...Rgb[]] = [
  srgb(0x23262a),
  srgb(0x2a2d30),
  srgb(0x4a4f52),
  srgb(0x7a4634),
  srgb(0x2c3f36),
];
const PEAT = srgb(0x2b1f16);
const PEAT_PALE = srgb(0x54422f);
const MOSS = srgb(0x4c5e22);
const FLEECE = srgb(0x9a9a94);

/** Compost, the plastic of the tray, and the bench below. */
function traySurface(
  relief: Relief,
  trays: Trays,
  empties: ReadonlyMap<string, number>,
  random: Random,
): (x: number, y: number, surface: Surface) => number {
  const plastic = pick(PLASTICS, random);
  const spot = newSpot();
  const moss = random() < 0.5 ? between(random, 0.05, 0.35) : 0;
  const damp = between(random, 0.6, 1.15);
  const shift = random() * 512;
  return (x, y, surface) => {
    spotIn(trays, x, y, spot);
    const z = relief.groundAt(x, y);
    surface.bumpX = relief.fallX(x, y);
    surface.bumpY = relief.fallY(x, y);
    if (spot.outsideTray > 0.15) {
      paint(surface, FLEECE);
      const stainAt = 0.5 + 0.5 * tap(CLOUD, x * 4 + shift, y * 4);
      stain(surface, PEAT, 0.65 * ramp(0.4, 1, stainAt) + 0.1 * hash(x * 30, y * 30, 3));
      return 0;
    }
    // The wall is steep; what lies below it is compost.
    const isSoil = spot.inside > 0.02 && z > -spot.inside * 5.5 + 0.03;
    if (!isSoil) {
      paint(surface, plastic);
      const dust = ramp(0.3, 0.9, tap(CLOUD, x * 9 + shift, y * 9) + 0.4 * tap(GRIT, x * 40, y * 40));
      stain(surface, PEAT_PALE, 0.5 * dust);
      surface.gloss = 0.42 * (1 - 0.7 * dust);
      const scratch = 0.05 * tap(GRIT, x * 40, y * 6);
      surface.bumpX += scratch;
      surface.bumpY += scratch;
      return spot.inside > 0 ? (empties.get(`${spot.column},${spot.row}`) ?? 0) : 0;
    }
    const lump = tap(CLOUD_TOO, x * 46, y * 46);
    const fibre =
      Math.max(0, 1 - 9 * Math.abs(tap(CLOUD, x * 20 + shift, y * 34 + 6 * lump))) *
      (hash(Math.floor(x * 3), Math.floor(y * 3), 4) > 0.5 ? 1 : 0);
    const tone =
      0.42 + 0.4 * lump + 0.25 * tap(GRIT, x * 34, y * 34 + shift) + 0.35 * tap(CLOUD, x * 5, y * 5 + shift);
    paint(surface, mixed(PEAT, PEAT_PALE, Math.min(1, Math.max(0, tone)) * damp));
    stain(surface, BARK_PALE, fibre * 0.35);
    if (hash(x * 42, y * 42, trays.seed) > 0.992) stain(surface, PERLITE, 0.75);
    if (hash(x * 30 + 9, y * 30, trays.seed) > 0.994) stain(surface, [0.45, 0.33, 0.14], 0.8);
    if (moss > 0) {
      const patch = ramp(
        0.95 - moss,
        1.25 - moss,
        0.5 + 0.6 * tap(CLOUD, x * 5 + shift, y * 5) + 0.2 * tap(GRIT, x * 30, y * 30),
      );
      stain(surface, MOSS, patch * (0.5 + 0.4 * tap(CELL, x * 60, y * 60)));
    }
    surface.gloss = 0.08 + 0.2 * Math.max(0, 1 - damp);
    surface.bumpX += 0.35 * tap(GRIT, x * 50 + 7, y * 50);
    surface.bumpY += 0.35 * tap(GRIT, x * 50, y * 50 + 91);
    return empties.get(`${spot.column},${spot.row}`) ?? 0;
  };
}

/** Soft light through whitewashed glass, or sun with the shade of glazing bars. */
function daylight(seed: number, random: Random): { light: Light; exposure: number; warmth: number } {
  const angle = random() * 6.283;
  const bounce: Rgb = [0.1, 0.08, 0.06];
  if (seed % 3 !== 1) {
    const light = {
      angle,
      elevation: between(random, 0.8, 1.2),
      sun: [0.95, 0.95, 0.92],
      zenith: [0.85, 0.9, 0.93],
      horizon: [0.8, 0.84, 0.86],
      bounce,
      softness: 0.3,
    } as const;
    return { light, exposure: 0.085, warmth: -0.01 };
  }
  const [barAngle, barAt] = [angle + nearZero(random) * 0.8, random() * 22];
  const gobo = (x: number, y: number) => {
    const across = (x * Math.cos(barAngle) + y * Math.sin(barAngle) + barAt + 2200) % 22;
    return 0.2 + 0.8 * ramp(1.1, 2.1, Math.abs(across - 11));
  };
  return {
    light: {
      angle,
      elevation: between(random, 0.6, 1),
      sun: [2, 1.85, 1.6],
      zenith: [0.68, 0.73, 0.78],
      horizon: [0.7, 0.72, 0.72],
      bounce,
      softness: 0.05,
      gobo,
    },
    exposure: 0.09,
    warmth: 0.02,
  };
}
