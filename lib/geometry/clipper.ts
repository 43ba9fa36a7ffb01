import { ClipperD, FillRule, type ClipType, type PathsD } from "clipper2-ts";

/** A sweep that is right meets each edge's upper end once; rounding adds a few. */
const SCANLINES_PER_VERTEX_MAX = 4;
const SCANLINES_SPARE = 64;

/**
 * One operation of the clipper under the even-odd rule, on a grid of 10^-decimals px; undefined where its sweep does
 * not come to an end. On some overlapping rings the sweep loses an edge's partner and then runs round the ring for
 * ever (tests/golden/geometry/clip-hang.json), and a synchronous call cannot be stopped from outside. So the scanlines it asks
 * for are counted: each edge of a sound sweep adds one.
 */
export function boundedBoolean(
  clipType: ClipType,
  subject: PathsD,
  clip: PathsD,
  decimals: number,
): PathsD | undefined {
  const clipper = new ClipperD(decimals);
  const vertices = [...subject, ...clip].reduce((sum, path) => sum + path.length, 0);
  let left = SCANLINES_PER_VERTEX_MAX * vertices + SCANLINES_SPARE;
  const insert: unknown = Reflect.get(clipper, "insertScanline");
  if (typeof insert !== "function") throw new Error("clipper2-ts has changed: it has no scanlines to count");
  Reflect.set(clipper, "insertScanline", (y: number) => {
    // The clipper takes any error for "did not succeed".
    if (left-- <= 0) throw new Error("the clipper's sweep does not end");
    Reflect.apply(insert, clipper, [y]);
  });
  clipper.addSubjectPaths(subject);
  clipper.addClipPaths(clip);
  const paths: PathsD = [];
  return clipper.execute(clipType, FillRule.EvenOdd, paths) ? paths : undefined;
}
