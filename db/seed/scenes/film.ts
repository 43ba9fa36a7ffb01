import type { Camera } from "./camera";
import type { Mesh } from "./mesh";

/** What a surface is made of at one point. A material writes it; colours are linear, 0..1. */
export type Surface = {
  r: number;
  g: number;
  b: number;
  /** 0 dull .. 1 a mirror's sharpness. */
  gloss: number;
  /** 1 for bare metal, which tints what it mirrors. */
  metal: number;
  /** Share of light from behind that comes through, for leaves and thin weed. */
  thin: number;
  /** 1 hides what lies behind; less for glass and clear plastic. */
  opacity: number;
  /** Added to the normal, in directions of the scene. */
  bumpX: number;
  bumpY: number;
  bumpZ: number;
};

/** Where on an object a surface is asked for: its own cm and its sheet's coordinates. */
export type Spot = { x: number; y: number; z: number; u: number; v: number };

export type Material = (spot: Spot, surface: Surface) => void;

/** One layer of a picture before light: depth, normal and material of each pixel, and whose it is. */
export type Layer = {
  /** 1 / depth in 1/cm; 0 where nothing is. */
  readonly nearness: Float32Array;
  /** x, y, z of the normal; then r, g, b; then gloss, metal, thin, opacity. */
  readonly normal: Float32Array;
  readonly colour: Float32Array;
  readonly finish: Float32Array;
};

export function layerOf(count: number): Layer {
  return {
    nearness: new Float32Array(count),
    normal: new Float32Array(count * 3),
    colour: new Float32Array(count * 3),
    finish: new Float32Array(count * 4),
  };
}

export const freshSurface = (): Surface => ({
  r: 0,
  g: 0,
  b: 0,
  gloss: 0,
  metal: 0,
  thin: 0,
  opacity: 1,
  bumpX: 0,
  bumpY: 0,
  bumpZ: 0,
});

/** Two triangles that share an edge must leave no pixel between them, whatever the rounding. */
const CRACK = -1e-7;

/** An object ready to be drawn; `owner` 0 is no object of the truth. */
export type Drawable = {
  readonly mesh: Mesh;
  readonly material: Material;
  readonly owner: number;
  readonly isClear: boolean;
  /** Lies on ground that counts as its owner's already, so it adds nothing to what the owner covers. */
  readonly isCounted?: boolean;
};

/**
 * The picture under work. Solid things go to one layer and clear ones to a second that only shows where it is nearer,
 * so a clear bottle keeps what lies behind it. `owner` names the object seen in each pixel: the nearest at the
 * pixel's centre, and nothing else, so the visible mask of each object is exact.
 */
export class Film {
  readonly solid: Layer;
  readonly clear: Layer;
  readonly owner: Int16Array;
  /** Pixels that each object covers, hidden or not. */
  readonly fullPx: number[] = [0];
  private readonly stamp: Int32Array;
  private stamps = 0;
  private readonly surface = freshSurface();
  private readonly spot: Spot = { x: 0, y: 0, z: 0, u: 0, v: 0 };

  constructor(readonly camera: Camera) {
    const count = camera.width * camera.height;
    this.solid = layerOf(count);
    this.clear = layerOf(count);
    this.owner = new Int16Array(count);
    this.stamp = new Int32Array(count);
  }

  /** Draws one object's parts. Parts of one owner that come in one call count each covered pixel once. O(pixels covered). */
  draw(parts: readonly Drawable[]): void {
    this.stamps += 1;
    for (const part of parts) this.drawMesh(part);
  }

  private drawMesh({ mesh, material, owner, isClear, isCounted = false }: Drawable): void {
    const { camera, stamp, stamps, spot, surface } = this;
    const { width, height, focalPx, eye, right, up, forward } = camera;
    const { positions, normals, locals, uvs, triangles } = mesh;
    const count = positions.length / 3;
    const projected = new Float64Array(count * 3);
    for (let i = 0; i < count; i++) {
      const dx = positions[i * 3]! - eye[0];
      const dy = positions[i * 3 + 1]! - eye[1];
      const dz = positions[i * 3 + 2]! - eye[2];
      const nearness = 1 / Math.max(1, dx * forward[0] + dy * forward[1] + dz * forward[2]);
      projected[i * 3] = width / 2 + focalPx * (dx * right[0] + dy * right[1] + dz * right[2]) * nearness;
      projected[i * 3 + 1] = height / 2 - focalPx * (dx * up[0] + dy * up[1] + dz * up[2]) * nearness;
      projected[i * 3 + 2] = nearness;
    }
    const layer = isClear ? this.clear : this.solid;
    const solidNearness = this.solid.nearness;
    let full = this.fullPx[owner] ?? 0;
    for (let t = 0; t < triangles.length; t += 3) {
      const a = triangles[t]!;
      const b = triangles[t + 1]!;
      const c = triangles[t + 2]!;
      const ax = projected[a * 3]!;
      const ay = projected[a * 3 + 1]!;
      const bx = projected[b * 3]!;
      const by = projected[b * 3 + 1]!;
      const cx = projected[c * 3]!;
      const cy = projected[c * 3 + 1]!;
      const area = (bx - ax) * (cy - ay) - (by - ay) * (cx - ax);
      if (area === 0) continue;
      const left = Math.max(0, Math.ceil(Math.min(ax, bx, cx) - 0.5));
      const end = Math.min(width - 1, Math.floor(Math.max(ax, bx, cx) - 0.5));
      const top = Math.max(0, Math.ceil(Math.min(ay, by, cy) - 0.5));
      const bottom = Math.min(height - 1, Math.floor(Math.max(ay, by, cy) - 0.5));
      // Seen from its back, a surface shows the other side of its normal.
      const facing = area < 0 ? 1 : -1;
      const az = projected[a * 3 + 2]!;
      const bz = projected[b * 3 + 2]!;
      const cz = projected[c * 3 + 2]!;
      for (let y = top; y <= bottom; y++) {
        for (let x = left; x <= end; x++) {
          const px = x + 0.5;
          const py = y + 0.5;
          const wb = ((px - ax) * (cy - ay) - (py - ay) * (cx - ax)) / area;
          const wc = ((bx - ax) * (py - ay) - (by - ay) * (px - ax)) / area;
          const wa = 1 - wb - wc;
          if (wa < CRACK || wb < CRACK || wc < CRACK) continue;
          const i = y * width + x;
          if (owner > 0 && !isCounted && stamp[i] !== stamps) {
            stamp[i] = stamps;
            full += 1;
          }
          const nearness = wa * az + wb * bz + wc * cz;
          if (nearness <= solidNearness[i]! || nearness <= layer.nearness[i]!) continue;
          spot.x = wa * locals[a * 3]! + wb * locals[b * 3]! + wc * locals[c * 3]!;
          spot.y = wa * locals[a * 3 + 1]! + wb * locals[b * 3 + 1]! + wc * locals[c * 3 + 1]!;
          spot.z = wa * locals[a * 3 + 2]! + wb * locals[b * 3 + 2]! + wc * locals[c * 3 + 2]!;
          spot.u = wa * uvs[a * 2]! + wb * uvs[b * 2]! + wc * uvs[c * 2]!;
          spot.v = wa * uvs[a * 2 + 1]! + wb * uvs[b * 2 + 1]! + wc * uvs[c * 2 + 1]!;
          surface.gloss = surface.metal = surface.thin = surface.bumpX = surface.bumpY = surface.bumpZ = 0;
          surface.opacity = 1;
          material(spot, surface);
          if (surface.opacity <= 0) continue;
          layer.nearness[i] = nearness;
          // A clear thing keeps its pixel unless something solid is nearer, whichever was drawn first.
          if (isClear || nearness > this.clear.nearness[i]!) this.owner[i] = owner;
          const nx =
            facing * (wa * normals[a * 3]! + wb * normals[b * 3]! + wc * normals[c * 3]!) + surface.bumpX;
          const ny =
            facing * (wa * normals[a * 3 + 1]! + wb * normals[b * 3 + 1]! + wc * normals[c * 3 + 1]!) +
            surface.bumpY;
          const nz =
            facing * (wa * normals[a * 3 + 2]! + wb * normals[b * 3 + 2]! + wc * normals[c * 3 + 2]!) +
            surface.bumpZ;
          put(layer, i, surface, nx, ny, nz);
        }
      }
    }
    if (owner > 0) this.fullPx[owner] = full;
  }

  /**
   * Lays the ground under what has been drawn; `at` fills the surface for a place on the ground and answers its owner.
   * The relief is low against the eye's height, so a few steps of z settle on the surface.
   */
  ground(
    heightAt: (x: number, y: number) => number,
    at: (x: number, y: number, surface: Surface) => number,
  ): void {
    const { camera, surface, solid, clear, owner, fullPx } = this;
    const { width, height, focalPx, eye, right, up, forward } = camera;
    for (let y = 0, i = 0; y < height; y++) {
      let z = 0;
      for (let x = 0; x < width; x++, i++) {
        const a = (x + 0.5 - width / 2) / focalPx;
        const b = (height / 2 - y - 0.5) / focalPx;
        const dx = forward[0] + a * right[0] + b * up[0];
        const dy = forward[1] + a * right[1] + b * up[1];
        const dz = Math.min(-0.02, forward[2] + a * right[2] + b * up[2]);
        for (let step = 0; step < 2; step++) {
          const t = (z - eye[2]) / dz;
          z = 0.2 * z + 0.8 * heightAt(eye[0] + t * dx, eye[1] + t * dy);
        }
        const depth = (z - eye[2]) / dz;
        const nearness = 1 / depth;
        const isHidden = solid.nearness[i]! >= nearness;
        surface.gloss = surface.metal = surface.thin = surface.bumpX = surface.bumpY = surface.bumpZ = 0;
        surface.opacity = 1;
        const of = at(eye[0] + depth * dx, eye[1] + depth * dy, surface);
        if (of > 0) fullPx[of] = (fullPx[of] ?? 0) + 1;
        if (isHidden) continue;
        // What is sunk into the ground is hidden by it, a clear thing too.
        if (nearness >= clear.nearness[i]!) owner[i] = of;
        solid.nearness[i] = nearness;
        put(solid, i, surface, surface.bumpX, surface.bumpY, 1 + surface.bumpZ);
      }
    }
  }
}

function put(
  { normal, colour, finish }: Layer,
  i: number,
  surface: Surface,
  nx: number,
  ny: number,
  nz: number,
): void {
  const length = Math.sqrt(nx * nx + ny * ny + nz * nz) || 1;
  normal[i * 3] = nx / length;
  normal[i * 3 + 1] = ny / length;
  normal[i * 3 + 2] = nz / length;
  colour[i * 3] = surface.r;
  colour[i * 3 + 1] = surface.g;
  colour[i * 3 + 2] = surface.b;
  finish[i * 4] = surface.gloss;
  finish[i * 4 + 1] = surface.metal;
  finish[i * 4 + 2] = surface.thin;
  finish[i * 4 + 3] = surface.opacity;
}
