import type { Point, Ring, Rings } from "./types";

/** A place on a ring: on the edge from vertex `index`, at the fraction t of it. */
type Place = { readonly ring: Ring; readonly index: number; readonly t: number; readonly point: Point };

/**
 * Moves vertices of a ring that lie within `distancePx` of a neighbour onto it: onto its nearest vertex where one is
 * in reach, else onto its nearest edge. Where two vertices in a row land on the same ring, the neighbour's vertices
 * between them are taken over, as long as they too lie in reach of the edge they replace, so that both
 * objects share one border without gap or overlap. O(vertices * neighbours' vertices).
 */
export function snapRing(ring: Ring, neighbours: Rings, distancePx: number): Ring {
  const places = ring.map((point) => findPlace(point, neighbours, distancePx));
  const snapped: Point[] = [];
  ring.forEach((point, i) => {
    const place = places[i];
    const next = places[(i + 1) % ring.length];
    snapped.push(place?.point ?? point);
    if (place === undefined || next === undefined || place.ring !== next.ring) return;
    const following = ring[(i + 1) % ring.length] ?? point;
    snapped.push(
      ...pathBetween(place, next, (v) => distanceToSegment(v, point, following).distance <= distancePx),
    );
  });
  return snapped.filter(
    (point, i) => !isSame(point, snapped[(i + snapped.length - 1) % snapped.length] ?? point),
  );
}

function isSame(a: Point, b: Point): boolean {
  return a[0] === b[0] && a[1] === b[1];
}

function findPlace(point: Point, neighbours: Rings, distancePx: number): Place | undefined {
  let best: Place | undefined;
  let bestDistance = distancePx;
  let isVertex = false;
  for (const ring of neighbours) {
    ring.forEach((from, index) => {
      const to = ring[(index + 1) % ring.length] ?? from;
      const toVertex = Math.hypot(point[0] - from[0], point[1] - from[1]);
      if (toVertex <= (isVertex ? bestDistance : distancePx)) {
        best = { ring, index, t: 0, point: from };
        bestDistance = toVertex;
        isVertex = true;
      }
      if (isVertex) return;
      const { distance, t, nearest } = distanceToSegment(point, from, to);
      if (distance <= bestDistance) {
        best = { ring, index, t, point: nearest };
        bestDistance = distance;
      }
    });
  }
  return best;
}

/** The neighbour's vertices strictly between two places, the way round on which all of them are admitted; else none. */
function pathBetween(from: Place, to: Place, isAdmitted: (vertex: Point) => boolean): readonly Point[] {
  const n = from.ring.length;
  const span = (start: Place, end: Place): Point[] => {
    const vertices: Point[] = [];
    const isAhead = start.index === end.index && start.t <= end.t;
    const steps = isAhead ? 0 : (end.index - start.index + n) % n || n;
    for (let k = 1; k <= steps; k++) {
      const vertex = start.ring[(start.index + k) % n];
      if (vertex !== undefined && !isSame(vertex, end.point) && !isSame(vertex, start.point))
        vertices.push(vertex);
    }
    return vertices;
  };
  const ahead = span(from, to);
  const back = span(to, from).toReversed();
  return (
    [ahead, back].filter((path) => path.every(isAdmitted)).toSorted((p, q) => p.length - q.length)[0] ?? []
  );
}

/** Distance in px from a point to a segment, with the nearest point of it. */
export function distanceToSegment(
  [x, y]: Point,
  from: Point,
  to: Point,
): { distance: number; t: number; nearest: Point } {
  const dx = to[0] - from[0];
  const dy = to[1] - from[1];
  const squared = dx * dx + dy * dy;
  const along = squared > 0 ? ((x - from[0]) * dx + (y - from[1]) * dy) / squared : 0;
  const t = Math.min(1, Math.max(0, along));
  const nearest: Point = t === 1 ? to : [from[0] + t * dx, from[1] + t * dy];
  return { distance: Math.hypot(x - nearest[0], y - nearest[1]), t, nearest };
}
