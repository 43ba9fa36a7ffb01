import type { Random } from "./random";

export type Vec = [number, number, number];

/**
 * A surface of triangles. `positions` and `normals` are in cm of the scene (x right, y away from the camera,
 * z up); `locals` are the places before the surface was posed, which its material reads; `uvs` run 0..1 over the sheet.
 */
export type Mesh = {
  readonly positions: Float32Array;
  readonly normals: Float32Array;
  readonly locals: Float32Array;
  readonly uvs: Float32Array;
  readonly triangles: Uint32Array;
};

/** A turn and a move: rows of the matrix, then the shift. */
export type Pose = { readonly turn: Float64Array; readonly shift: Vec };

/**
 * A pose that turns about the object's own x axis (`roll`), tips that axis up (`pitch`), swings it on the ground
 * (`yaw`; all in radians) and puts it at x, y, z in cm.
 */
export function pose(x: number, y: number, z: number, { yaw = 0, pitch = 0, roll = 0 }): Pose {
  const [cy, sy, cp, sp, cr, sr] = [
    Math.cos(yaw),
    Math.sin(yaw),
    Math.cos(pitch),
    Math.sin(pitch),
    Math.cos(roll),
    Math.sin(roll),
  ];
  const turn = Float64Array.of(
    cy * cp,
    -sy * cr - cy * sp * sr,
    sy * sr - cy * sp * cr,
    sy * cp,
    cy * cr - sy * sp * sr,
    -cy * sr - sy * sp * cr,
    sp,
    cp * sr,
    cp * cr,
  );
  return { turn, shift: [x, y, z] };
}

/**
 * A sheet of rows x columns quads, `place(u, v, out)` giving each corner in the object's own cm. With `isTube` the last
 * column meets the first, and normals run smoothly across the seam.
 */
export function sheet(
  rows: number,
  columns: number,
  isTube: boolean,
  place: (u: number, v: number, out: Vec) => void,
): Mesh {
  const across = columns + 1;
  const count = (rows + 1) * across;
  const positions = new Float32Array(count * 3);
  const uvs = new Float32Array(count * 2);
  const out: Vec = [0, 0, 0];
  for (let row = 0, i = 0; row <= rows; row++) {
    for (let column = 0; column <= columns; column++, i++) {
      place(row / rows, isTube && column === columns ? 0 : column / columns, out);
      positions[i * 3] = out[0];
      positions[i * 3 + 1] = out[1];
      positions[i * 3 + 2] = out[2];
      uvs[i * 2] = row / rows;
      uvs[i * 2 + 1] = column / columns;
    }
  }
  const triangles = new Uint32Array(rows * columns * 6);
  for (let row = 0, at = 0; row < rows; row++) {
    for (let column = 0; column < columns; column++, at += 6) {
      const a = row * across + column;
      triangles[at] = a;
      triangles[at + 1] = triangles[at + 4] = a + across;
      triangles[at + 2] = triangles[at + 3] = a + 1;
      triangles[at + 5] = a + across + 1;
    }
  }
  const normals = normalsOf(positions, triangles);
  if (isTube) joinSeam(normals, rows, columns);
  return { positions, normals, locals: positions, uvs, triangles };
}

function normalsOf(positions: Float32Array, triangles: Uint32Array): Float32Array {
  const normals = new Float32Array(positions.length);
  for (let t = 0; t < triangles.length; t += 3) {
    const a = triangles[t]! * 3;
    const b = triangles[t + 1]! * 3;
    const c = triangles[t + 2]! * 3;
    const ux = positions[b]! - positions[a]!;
    const uy = positions[b + 1]! - positions[a + 1]!;
    const uz = positions[b + 2]! - positions[a + 2]!;
    const vx = positions[c]! - positions[a]!;
    const vy = positions[c + 1]! - positions[a + 1]!;
    const vz = positions[c + 2]! - positions[a + 2]!;
    for (let k = 0, corner = a; k < 3; k++, corner = k === 1 ? b : c) {
      normals[corner]! += uy * vz - uz * vy;
      normals[corner + 1]! += uz * vx - ux * vz;
      normals[corner + 2]! += ux * vy - uy * vx;
    }
  }
  for (let i = 0; i < normals.length; i += 3) {
    const length = Math.sqrt(normals[i]! ** 2 + normals[i + 1]! ** 2 + normals[i + 2]! ** 2) || 1;
    normals[i]! /= length;
    normals[i + 1]! /= length;
    normals[i + 2]! /= length;
  }
  return normals;
}

function joinSeam(normals: Float32Array, rows: number, columns: number): void {
  for (let row = 0; row <= rows; row++) {
    const first = row * (columns + 1) * 3;
    const last = first + columns * 3;
    for (let k = 0; k < 3; k++) {
      const mean = (normals[first + k]! + normals[last + k]!) / 2;
      normals[first + k] = mean;
      normals[last + k] = mean;
    }
  }
}

/** The surface in its pose. */
export function posed(mesh: Mesh, { turn, shift }: Pose): Mesh {
  return {
    ...mesh,
    positions: turned(mesh.positions, turn, shift),
    normals: turned(mesh.normals, turn, [0, 0, 0]),
  };
}

function turned(from: Float32Array, m: Float64Array, [sx, sy, sz]: Vec): Float32Array {
  const to = new Float32Array(from.length);
  for (let i = 0; i < from.length; i += 3) {
    const x = from[i]!;
    const y = from[i + 1]!;
    const z = from[i + 2]!;
    to[i] = m[0]! * x + m[1]! * y + m[2]! * z + sx;
    to[i + 1] = m[3]! * x + m[4]! * y + m[5]! * z + sy;
    to[i + 2] = m[6]! * x + m[7]! * y + m[8]! * z + sz;
  }
  return to;
}

/** Lowest point of a surface, cm. */
export function lowestOf({ positions }: Mesh): number {
  let lowest = Infinity;
  for (let i = 2; i < positions.length; i += 3) lowest = Math.min(lowest, positions[i]!);
  return lowest;
}

/** Raises or lowers a surface by `z` cm. */
export function raised(mesh: Mesh, z: number): Mesh {
  const positions = mesh.positions.slice();
  for (let i = 2; i < positions.length; i += 3) positions[i]! += z;
  return { ...mesh, positions };
}

/** A profile of [x, radius] turned about the x axis; `dent(x, angle, radius)` may change each radius. */
export function lathe(
  profile: readonly (readonly [number, number])[],
  sides: number,
  dent: (x: number, angle: number, radius: number) => number = (_, __, radius) => radius,
): Mesh {
  const rows = profile.length - 1;
  return sheet(rows, sides, true, (u, v, out) => {
    const [x, radius] = profile[Math.round(u * rows)] ?? [0, 0];
    const angle = v * 2 * Math.PI;
    const r = dent(x, angle, radius);
    out[0] = x;
    out[1] = r * Math.cos(angle);
    out[2] = r * Math.sin(angle);
  });
}

/** Points of a smooth curve (Catmull and Rom, 1974) through the given ones, `perSpan` steps between two. */
export function smoothCurve(points: readonly Vec[], perSpan: number): Vec[] {
  const curve: Vec[] = [];
  const spans = points.length - 1;
  const at = (i: number): Vec => points[Math.min(spans, Math.max(0, i))] ?? [0, 0, 0];
  for (let span = 0; span < spans; span++) {
    const [a, b, c, d] = [at(span - 1), at(span), at(span + 1), at(span + 2)];
    for (let step = 0; step < perSpan; step++) {
      const t = step / perSpan;
      curve.push([
        between4(a[0], b[0], c[0], d[0], t),
        between4(a[1], b[1], c[1], d[1], t),
        between4(a[2], b[2], c[2], d[2], t),
      ]);
    }
  }
  curve.push(at(spans));
  return curve;
}

/** Value at t of 0..1 between b and c, bending as a and d ask. */
function between4(a: number, b: number, c: number, d: number, t: number): number {
  return (
    0.5 * (2 * b + (c - a) * t + (2 * a - 5 * b + 4 * c - d) * t * t + (3 * b - a - 3 * c + d) * t * t * t)
  );
}

/** A round tube along a curve; `radius(u)` in cm, u 0..1 from end to end. Sides are set level with the ground. */
export function tube(
  curve: readonly Vec[],
  sides: number,
  radius: (u: number, angle: number) => number,
): Mesh {
  const rows = curve.length - 1;
  return sheet(rows, sides, true, (u, v, out) => {
    const i = Math.round(u * rows);
    const [x, y, z] = curve[i] ?? [0, 0, 0];
    const [bx, by, bz] = curve[Math.max(0, i - 1)] ?? [0, 0, 0];
    const [ax, ay, az] = curve[Math.min(rows, i + 1)] ?? [0, 0, 0];
    const length = Math.hypot(ax - bx, ay - by, az - bz) || 1;
    const [tx, ty, tz] = [(ax - bx) / length, (ay - by) / length, (az - bz) / length];
    const flat = Math.hypot(tx, ty) || 1e-6;
    const [sx, sy] = [-ty / flat, tx / flat];
    const [ux, uy, uz] = [-tz * sy, tz * sx, tx * sy - ty * sx];
    const angle = v * 2 * Math.PI;
    const r = i === 0 || i === rows ? radius(u, angle) * 0.3 : radius(u, angle);
    const [c, s] = [r * Math.cos(angle), r * Math.sin(angle)];
    out[0] = x + sx * c + ux * s;
    out[1] = y + sy * c + uy * s;
    out[2] = z + uz * s;
  });
}

/** A flat band along a curve: `half(u)` is half its width, `crown(u, side)` how far it stands off the curve, cm. */
export function band(
  curve: readonly Vec[],
  columns: number,
  half: (u: number) => number,
  crown: (u: number, side: number) => number,
): Mesh {
  const rows = curve.length - 1;
  return sheet(rows, columns, false, (u, v, out) => {
    const i = Math.round(u * rows);
    const [x, y, z] = curve[i] ?? [0, 0, 0];
    const [bx, by] = curve[Math.max(0, i - 1)] ?? [0, 0, 0];
    const [ax, ay] = curve[Math.min(rows, i + 1)] ?? [0, 0, 0];
    const length = Math.hypot(ax - bx, ay - by) || 1;
    const side = v * 2 - 1;
    const off = half(u) * side;
    out[0] = x - ((ay - by) / length) * off;
    out[1] = y + ((ax - bx) / length) * off;
    out[2] = z + crown(u, side);
  });
}

/** A curve on the ground that starts at x, y, heads for `angle` and strays by up to `stray` radians a step. */
export function wandering(
  x: number,
  y: number,
  angle: number,
  { steps, stepCm, stray }: { steps: number; stepCm: number; stray: number },
  random: Random,
): Vec[] {
  const points: Vec[] = [[x, y, 0]];
  let bend = (random() - 0.5) * stray;
  for (let i = 0; i < steps; i++) {
    bend = 0.6 * bend + (random() - 0.5) * stray;
    angle += bend;
    x += Math.cos(angle) * stepCm;
    y += Math.sin(angle) * stepCm;
    points.push([x, y, 0]);
  }
  return points;
}
