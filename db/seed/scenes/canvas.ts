import { hash } from "./noise";

export type Rgb = readonly [number, number, number];

/** What a surface is made of at one point; colours 0..1, height in px above the ground plane. */
export type Surface = {
  height: number;
  /** Normal's components along x and y; z follows from unit length. */
  nx: number;
  ny: number;
  colour: Rgb;
  /** Strength of the highlight, 0..1. */
  gloss: number;
  /** How much of the ground's colour shows through, 0..1. */
  clear?: number;
};

/** Light on a scene: where it comes from on the sheet, how high it stands, its colour, and that of the sky. */
export type Light = { angle: number; elevation: number; sun: Rgb; sky: Rgb; shadow: number };

/**
 * A picture under work, seen from above: colour, relief and owner of each pixel. Stamps are laid one on the
 * other; the owner of a pixel is whoever was laid last, so the visible mask of each object is exact.
 */
export class Canvas {
  readonly colour: Float32Array;
  readonly nx: Float32Array;
  readonly ny: Float32Array;
  readonly height: Float32Array;
  readonly gloss: Float32Array;
  /** 0 for the ground and for what lies on it but is no object; else the object's number. */
  readonly owner: Int16Array;
  /** Pixels that each object would cover if nothing lay on it. */
  readonly full: number[] = [0];

  constructor(
    readonly width: number,
    readonly heightPx: number,
  ) {
    const count = width * heightPx;
    this.colour = new Float32Array(count * 3);
    this.nx = new Float32Array(count);
    this.ny = new Float32Array(count);
    this.height = new Float32Array(count);
    this.gloss = new Float32Array(count);
    this.owner = new Int16Array(count);
  }

  /** Fills the ground; `relief` is its fine height in px, from whose slopes its normals are taken. */
  ground(relief: (x: number, y: number) => number, at: (x: number, y: number) => Surface): void {
    const { width, heightPx } = this;
    let row = Float32Array.from({ length: width + 1 }, (_, x) => relief(x, 0));
    for (let y = 0; y < heightPx; y++) {
      const below = Float32Array.from({ length: width + 1 }, (_, x) => relief(x, y + 1));
      for (let x = 0; x < width; x++) {
        const i = y * width + x;
        this.put(i, at(x, y), 0);
        this.nx[i] = this.nx[i]! + row[x]! - row[x + 1]!;
        this.ny[i] = this.ny[i]! + row[x]! - below[x]!;
      }
      row = below;
    }
  }

  /** Lays a stamp over a box of pixels; `at` answers undefined where it is not. Returns the pixels covered. */
  stamp(
    box: readonly [number, number, number, number],
    owner: number,
    at: (x: number, y: number) => Surface | undefined,
  ): number {
    const [left, top, right, bottom] = box;
    let covered = 0;
    for (let y = Math.max(0, Math.floor(top)); y < Math.min(this.heightPx, Math.ceil(bottom)); y++) {
      for (let x = Math.max(0, Math.floor(left)); x < Math.min(this.width, Math.ceil(right)); x++) {
        const surface = at(x + 0.5, y + 0.5);
        if (!surface) continue;
        this.put(y * this.width + x, surface, owner);
        covered += 1;
      }
    }
    if (owner > 0) this.full[owner] = (this.full[owner] ?? 0) + covered;
    return covered;
  }

  private put(i: number, surface: Surface, owner: number): void {
    const clear = surface.clear ?? 0;
    for (let channel = 0; channel < 3; channel++) {
      const below = this.colour[i * 3 + channel]!;
      this.colour[i * 3 + channel] = clear * below + (1 - clear) * surface.colour[channel]!;
    }
    this.nx[i] = surface.nx + clear * 0.5 * this.nx[i]!;
    this.ny[i] = surface.ny + clear * 0.5 * this.ny[i]!;
    this.height[i] = Math.max(surface.height, 0);
    this.gloss[i] = surface.gloss;
    this.owner[i] = owner;
  }

  /** Shades the picture: sun with soft shadows of the relief, sky, highlights, vignette and sensor noise. RGB bytes. */
  shade(light: Light, seed: number): Uint8Array {
    const { width, heightPx, height } = this;
    const out = new Uint8Array(width * heightPx * 3);
    const cos = Math.cos(light.elevation);
    const [lx, ly, lz] = [
      Math.cos(light.angle) * cos,
      Math.sin(light.angle) * cos,
      Math.sin(light.elevation),
    ];
    const rise = Math.tan(light.elevation);
    const half = Math.hypot(lx, ly, lz + 1);
    const reach = Math.min(70, 46 / Math.max(0.2, rise));
    const [towardX, towardY] = [Math.cos(light.angle), Math.sin(light.angle)];
    const highest = this.height.reduce((most, value) => Math.max(most, value), 0);
    for (let y = 0; y < heightPx; y++) {
      for (let x = 0; x < width; x++) {
        const i = y * width + x;
        const [nx, ny] = [this.nx[i]!, this.ny[i]!];
        const length = Math.hypot(nx, ny, 1);
        const lambert = Math.max(0, (nx * lx + ny * ly + lz) / length);
        let blocked = 0;
        const own = height[i]!;
        for (let step = 2; step < reach; step += step < 12 ? 2 : 4) {
          if (own + step * rise > highest) break; // nothing here is tall enough to shade from so far
          const px = (x + towardX * step + 0.5) | 0;
          const py = (y + towardY * step + 0.5) | 0;
          if (px < 0 || py < 0 || px >= width || py >= heightPx) break;
          const over = height[py * width + px]! - own - step * rise;
          if (over > 0) blocked = Math.max(blocked, Math.min(1, over / 3));
        }
        const lit = lambert * (1 - light.shadow * blocked);
        const mirror = Math.max(0, (nx * lx + ny * ly + lz + 1) / (length * half));
        const shine = this.gloss[i]! * Math.pow(mirror, 60) * 1.3 * (1 - blocked);
        const sky = 0.55 + 0.45 / length;
        const fall = 1 - 0.22 * (((x / width - 0.5) ** 2 + (y / heightPx - 0.5) ** 2) * 2);
        const grain = (hash(x, y, seed) + hash(x, y, seed + 7) - 1) * 0.035;
        for (let channel = 0; channel < 3; channel++) {
          const albedo = this.colour[i * 3 + channel]!;
          const value =
            (albedo * (light.sun[channel]! * lit + light.sky[channel]! * sky) + shine * light.sun[channel]!) *
              fall +
            grain;
          out[i * 3 + channel] = Math.max(0, Math.min(255, Math.pow(Math.max(0, value), 1 / 2.2) * 255));
        }
      }
    }
    return out;
  }
}

/** A colour mixed towards another. */
export function mix(a: Rgb, b: Rgb, t: number): Rgb {
  return [a[0] + (b[0] - a[0]) * t, a[1] + (b[1] - a[1]) * t, a[2] + (b[2] - a[2]) * t];
}
