import type { Mesh } from "./mesh";

/** Bounds of the ground that a relief covers, cm: left, near, right, far. */
export type Bounds = readonly [number, number, number, number];

/** Where the sun stands: a unit vector on the ground towards it, and how many cm its rays climb per cm. */
export type Sun = { dx: number; dy: number; rise: number };

/** Side of a block of cells, and how far shadows are looked for closely and at all, in cells. */
const BLOCK = 16;
const NEAR_CELLS = 22;
const FAR_CELLS = 240;

/** Cells for a picture of this size: about half as many as it has pixels, so that a cell is never seen as such. */
export function cellCount({ width, height }: { width: number; height: number }): number {
  return Math.max(1.5e5, 0.55 * width * height);
}

/**
 * The scene from straight above on a grid of square cells: height of the ground and of whatever stands on it, cm.
 * It gives weed and rope something to drape over, the sun its shadows, and hollows their shade.
 */
export class Relief {
  readonly columns: number;
  readonly rows: number;
  readonly ground: Float32Array;
  readonly top: Float32Array;
  /** Share of sunlight that the thing on top stops. */
  readonly stops: Float32Array;
  /** Highest point of each block of cells, for passing over open ground. */
  private blocks: Float32Array = new Float32Array(0);
  private blockColumns = 0;
  private slopesX: Float32Array = new Float32Array(0);
  private slopesY: Float32Array = new Float32Array(0);
  private horizon: Float32Array = new Float32Array(0);
  private sun: Sun = { dx: 1, dy: 0, rise: 1 };
  private shade: { near: Float32Array; wide: Float32Array } | undefined;

  constructor(
    readonly bounds: Bounds,
    readonly cellCm: number,
  ) {
    this.columns = Math.ceil((bounds[2] - bounds[0]) / cellCm) + 1;
    this.rows = Math.ceil((bounds[3] - bounds[1]) / cellCm) + 1;
    this.ground = new Float32Array(this.columns * this.rows);
    this.top = new Float32Array(this.columns * this.rows);
    this.stops = new Float32Array(this.columns * this.rows).fill(1);
  }

  /** Sets the height of the ground from a function of x and y in cm. */
  shape(heightAt: (x: number, y: number) => number): void {
    for (let row = 0, i = 0; row < this.rows; row++) {
      for (let column = 0; column < this.columns; column++, i++) {
        this.ground[i] = heightAt(this.bounds[0] + column * this.cellCm, this.bounds[1] + row * this.cellCm);
      }
    }
    this.top.set(this.ground);
  }

  /** Adds `by(distance in cm)` to the ground within a radius of a place: a mound or a hollow. */
  model(x: number, y: number, radiusCm: number, by: (dx: number, dy: number) => number): void {
    const [left, near] = this.bounds;
    const reach = radiusCm / this.cellCm;
    const [cx, cy] = [(x - left) / this.cellCm, (y - near) / this.cellCm];
    for (let row = Math.max(0, Math.ceil(cy - reach)); row <= Math.min(this.rows - 1, cy + reach); row++) {
      for (
        let column = Math.max(0, Math.ceil(cx - reach));
        column <= Math.min(this.columns - 1, cx + reach);
        column++
      ) {
        const i = row * this.columns + column;
        this.ground[i]! += by((column - cx) * this.cellCm, (row - cy) * this.cellCm);
        this.top[i] = Math.max(this.top[i]!, this.ground[i]!);
      }
    }
  }

  private sample(values: Float32Array, x: number, y: number): number {
    const column = Math.min(this.columns - 1.001, Math.max(0, (x - this.bounds[0]) / this.cellCm));
    const row = Math.min(this.rows - 1.001, Math.max(0, (y - this.bounds[1]) / this.cellCm));
    const i = Math.floor(column);
    const j = Math.floor(row);
    const u = column - i;
    const v = row - j;
    const at = j * this.columns + i;
    const below = at + this.columns;
    return (
      (values[at]! * (1 - u) + values[at + 1]! * u) * (1 - v) +
      (values[below]! * (1 - u) + values[below + 1]! * u) * v
    );
  }

  /** Call once the ground has its shape: prepares its slopes. */
  finishGround(): void {
    const { ground, columns, rows, cellCm } = this;
    this.slopesX = new Float32Array(ground.length);
    this.slopesY = new Float32Array(ground.length);
    for (let row = 0, i = 0; row < rows; row++) {
      const back = row > 0 ? columns : 0;
      const on = row < rows - 1 ? columns : 0;
      for (let column = 0; column < columns; column++, i++) {
        const before = column > 0 ? 1 : 0;
        const after = column < columns - 1 ? 1 : 0;
        this.slopesX[i] = (ground[i - before]! - ground[i + after]!) / ((before + after) * cellCm);
        this.slopesY[i] = (ground[i - back]! - ground[i + on]!) / ((back > 0 && on > 0 ? 2 : 1) * cellCm);
      }
    }
  }

  /** How far the ground falls towards larger x, cm per cm: the x component of its normal. */
  fallX(x: number, y: number): number {
    return this.sample(this.slopesX, x, y);
  }

  fallY(x: number, y: number): number {
    return this.sample(this.slopesY, x, y);
  }

  groundAt(x: number, y: number): number {
    return this.sample(this.ground, x, y);
  }

  topAt(x: number, y: number): number {
    return this.sample(this.top, x, y);
  }

  /** Lays a surface on the relief. `stops` is the share of light that it holds back. O(cells covered). */
  add({ positions, triangles }: Mesh, stops = 1): void {
    const [left, near] = this.bounds;
    const { cellCm, columns, rows, top } = this;
    for (let t = 0; t < triangles.length; t += 3) {
      const a = triangles[t]! * 3;
      const b = triangles[t + 1]! * 3;
      const c = triangles[t + 2]! * 3;
      const ax = (positions[a]! - left) / cellCm;
      const ay = (positions[a + 1]! - near) / cellCm;
      const bx = (positions[b]! - left) / cellCm;
      const by = (positions[b + 1]! - near) / cellCm;
      const cx = (positions[c]! - left) / cellCm;
      const cy = (positions[c + 1]! - near) / cellCm;
      const area = (bx - ax) * (cy - ay) - (by - ay) * (cx - ax);
      if (area === 0) continue;
      const az = positions[a + 2]!;
      const bz = positions[b + 2]!;
      const cz = positions[c + 2]!;
      const lastRow = Math.min(rows - 1, Math.floor(Math.max(ay, by, cy)));
      const lastColumn = Math.min(columns - 1, Math.floor(Math.max(ax, bx, cx)));
      for (let row = Math.max(0, Math.ceil(Math.min(ay, by, cy))); row <= lastRow; row++) {
        for (let column = Math.max(0, Math.ceil(Math.min(ax, bx, cx))); column <= lastColumn; column++) {
          const wb = ((column - ax) * (cy - ay) - (row - ay) * (cx - ax)) / area;
          const wc = ((bx - ax) * (row - ay) - (by - ay) * (column - ax)) / area;
          if (wb < 0 || wc < 0 || wb + wc > 1) continue;
          const i = row * columns + column;
          const z = (1 - wb - wc) * az + wb * bz + wc * cz;
          if (z <= top[i]!) continue;
          top[i] = z;
          this.stops[i] = stops;
        }
      }
    }
  }

  /**
   * Call once everything is laid: prepares the shade of hollows and the sun's shadows. The sun stands along
   * `dx, dy` (unit vector on the ground) and climbs `rise` cm per cm.
   */
  settle({ dx, dy, rise }: Sun): void {
    // A clear thing shuts out the sky no more than it does the sun, or its inside would be dark.
    const bulk = this.top.map((z, i) => this.ground[i]! + (z - this.ground[i]!) * this.stops[i]!);
    const { columns, rows } = this;
    this.shade = { near: blurred(bulk, columns, rows, 4), wide: blurred(bulk, columns, rows, 16) };
    this.sun = { dx, dy, rise };
    const across = Math.ceil(this.columns / BLOCK);
    const down = Math.ceil(this.rows / BLOCK);
    this.blocks = new Float32Array(across * down).fill(-1e9);
    this.blockColumns = across;
    for (let row = 0; row < this.rows; row++) {
      for (let column = 0; column < this.columns; column++) {
        const block = Math.floor(row / BLOCK) * across + Math.floor(column / BLOCK);
        this.blocks[block] = Math.max(this.blocks[block]!, this.top[row * this.columns + column]!);
      }
    }
    this.horizon = this.horizons(across, down);
  }

  /** For each block, the height above which a point in it has the sun in sight past `NEAR_CELLS`. */
  private horizons(across: number, down: number): Float32Array {
    const { dx, dy, rise } = this.sun;
    const horizon = new Float32Array(across * down);
    for (let row = 0, i = 0; row < down; row++) {
      for (let column = 0; column < across; column++, i++) {
        let height = -1e9;
        for (let far = 0; far * BLOCK <= FAR_CELLS + BLOCK; far++) {
          // A block and its neighbours cover all rays that leave any point of this block.
          const x = Math.round(column + dx * far);
          const y = Math.round(row + dy * far);
          const drop = Math.max(NEAR_CELLS, (far - 2) * BLOCK) * this.cellCm * rise;
          for (let oy = -1; oy <= 1; oy++) {
            for (let ox = -1; ox <= 1; ox++) {
              if (x + ox < 0 || y + oy < 0 || x + ox >= across || y + oy >= down) continue;
              height = Math.max(height, this.blocks[(y + oy) * across + x + ox]! - drop);
            }
          }
        }
        horizon[i] = height;
      }
    }
    return horizon;
  }

  /**
   * Share of the sun that reaches a point, 0..1. The edge of a shadow softens with the distance of what throws it by
   * `softness`. `jitter` in 0..1 breaks up steps.
   */
  sunAt(x: number, y: number, z: number, softness: number, jitter: number): number {
    const { cellCm, columns, rows, top, stops } = this;
    const { dx, dy, rise } = this.sun;
    const cx = (x - this.bounds[0]) / cellCm;
    const cy = (y - this.bounds[1]) / cellCm;
    if (cx < 0 || cy < 0 || cx >= columns || cy >= rows) return 1;
    const horizon = this.horizon[Math.floor(cy / BLOCK) * this.blockColumns + Math.floor(cx / BLOCK)]!;
    const last = z >= horizon ? NEAR_CELLS : FAR_CELLS;
    let blocked = 0;
    let step = 1.2 + 0.8 * jitter;
    while (step < last) {
      const column = (cx + dx * step + 0.5) | 0;
      const row = (cy + dy * step + 0.5) | 0;
      if (column < 0 || row < 0 || column >= columns || row >= rows) break;
      const i = row * columns + column;
      const over = top[i]! - z - step * cellCm * rise;
      if (over > 0) {
        const share = Math.min(1, over / (cellCm * (0.5 + softness * step))) * stops[i]!;
        if (share > blocked) {
          blocked = share;
          if (blocked >= 0.99) break;
        }
      }
      step += 0.7 + step * 0.11;
    }
    return 1 - blocked;
  }

  /** Share of the sky that a point sees, 0..1, from how far the surroundings stand above it. */
  skyAt(x: number, y: number, z: number): number {
    if (!this.shade) return 1;
    const { cellCm, columns, rows, bounds } = this;
    const column = Math.min(columns - 1, Math.max(0, ((x - bounds[0]) / cellCm + 0.5) | 0));
    const row = Math.min(rows - 1, Math.max(0, ((y - bounds[1]) / cellCm + 0.5) | 0));
    const near = Math.max(0, this.sample(this.shade.near, x, y) - z) / (cellCm * 4);
    // The wide blur hardly changes from cell to cell, so the nearest cell will do.
    const wide = Math.max(0, this.shade.wide[row * columns + column]! - z) / (cellCm * 14);
    return 1 / (1 + 1.5 * near + 1.6 * wide);
  }
}

/** Two box blurs, which together are near a Gaussian; `radius` in cells. */
function blurred(values: Float32Array, columns: number, rows: number, radius: number): Float32Array {
  let from: Float32Array = values;
  for (let pass = 0; pass < 2; pass++) {
    const across = new Float32Array(from.length);
    boxBlur(from, across, rows, columns, columns, 1, radius);
    const down = new Float32Array(from.length);
    boxBlur(across, down, columns, rows, 1, columns, radius);
    from = down;
  }
  return from;
}

/** Mean over 2 radius + 1 cells along lines of `length` cells that lie `stride` apart; lines start `lineStride` apart. */
function boxBlur(
  from: Float32Array,
  to: Float32Array,
  lines: number,
  length: number,
  lineStride: number,
  stride: number,
  radius: number,
): void {
  const share = 1 / (2 * radius + 1);
  for (let line = 0; line < lines; line++) {
    const start = line * lineStride;
    const end = start + (length - 1) * stride;
    let sum = from[start]! * (radius + 1);
    for (let k = 1; k <= radius; k++) sum += from[Math.min(end, start + k * stride)]!;
    for (let i = start; i <= end; i += stride) {
      to[i] = sum * share;
      sum += from[Math.min(end, i + (radius + 1) * stride)]! - from[Math.max(start, i - radius * stride)]!;
    }
  }
}
