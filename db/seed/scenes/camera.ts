import type { Vec } from "./mesh";

/** A camera on a pole: it stands over the origin, looks away along y, and tips down. Lengths in cm, angles in radians. */
export type Camera = {
  readonly width: number;
  readonly height: number;
  readonly focalPx: number;
  readonly eye: Vec;
  readonly right: Vec;
  readonly up: Vec;
  readonly forward: Vec;
};

export type CameraPlan = { heightCm: number; pitch: number; roll: number; fieldOfView: number };

/** `pitch` is how far it looks down (a right angle is straight down), `fieldOfView` that of the longer side. */
export function cameraOf(
  width: number,
  height: number,
  { heightCm, pitch, roll, fieldOfView }: CameraPlan,
): Camera {
  const focalPx = Math.max(width, height) / 2 / Math.tan(fieldOfView / 2);
  const forward: Vec = [0, Math.cos(pitch), -Math.sin(pitch)];
  const level: Vec = [0, Math.sin(pitch), Math.cos(pitch)];
  const [c, s] = [Math.cos(roll), Math.sin(roll)];
  const right: Vec = [c, s * level[1], s * level[2]];
  const up: Vec = [-s, c * level[1], c * level[2]];
  return { width, height, focalPx, eye: [0, 0, heightCm], right, up, forward };
}

/** Direction of the ray through a place of the picture, scaled so that its depth along the view axis is 1. */
export function rayThrough(
  { width, height, focalPx, right, up, forward }: Camera,
  x: number,
  y: number,
  out: Vec,
): void {
  const a = (x - width / 2) / focalPx;
  const b = (height / 2 - y) / focalPx;
  for (let k = 0; k < 3; k++) out[k] = forward[k]! + a * right[k]! + b * up[k]!;
}

/** Where the ray through a place of the picture meets the ground plane z = 0. */
export function groundAt(camera: Camera, x: number, y: number): [number, number] {
  const ray: Vec = [0, 0, 0];
  rayThrough(camera, x, y, ray);
  const t = camera.eye[2] / Math.max(1e-3, -ray[2]);
  return [camera.eye[0] + t * ray[0], camera.eye[1] + t * ray[1]];
}

/** Left, near, right and far bound of the ground in view, cm. */
export function groundBounds(camera: Camera): [number, number, number, number] {
  const { width, height } = camera;
  const corners = [
    [0, 0],
    [width, 0],
    [0, height],
    [width, height],
  ].map(([x = 0, y = 0]) => groundAt(camera, x, y));
  const xs = corners.map(([x]) => x);
  const ys = corners.map(([, y]) => y);
  return [Math.min(...xs), Math.min(...ys), Math.max(...xs), Math.max(...ys)];
}

/** Picture px for one cm at this place on the ground. */
export function scaleAt({ eye, forward, focalPx }: Camera, x: number, y: number): number {
  const depth = (x - eye[0]) * forward[0] + (y - eye[1]) * forward[1] - eye[2] * forward[2];
  return focalPx / Math.max(1, depth);
}
