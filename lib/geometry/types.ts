/**
 * Shapes of the whole product. Space: pixels of the upright original image, origin at the top left corner
 * of the top left pixel, x right, y down. Pixel (i, j) covers [i, i+1) x [j, j+1).
 */

/** x, y in px. */
export type Point = readonly [x: number, y: number];

/** x, y of the top left corner, then width and height, in px. */
export type Box = readonly [x: number, y: number, width: number, height: number];

/** Three vertices or more, not closed (the last vertex joins the first by itself). */
export type Ring = readonly Point[];

/**
 * A region bounded by rings under the even-odd rule, held everywhere: a point is inside when a ray from it
 * crosses the rings an odd number of times. Holes and separate parts are simply further rings.
 */
export type Rings = readonly Ring[];

/** What a person draws or an engine finds: a box, or a region. */
export type Shape =
  { readonly kind: "box"; readonly box: Box } | { readonly kind: "polygon"; readonly rings: Rings };
