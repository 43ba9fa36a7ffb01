import { paintGlasshouse } from "./glasshouse";
import { develop } from "./lens";
import { expose } from "./light";
import { randomFrom } from "./random";
import type { Species } from "./seedling";
import type { Ground } from "./beach";
import { LITTER, type ShoreClass } from "./classes";
import { paintShore } from "./shore";
import { instancesOf, type SceneInstance } from "./truth";

export { annotate, type Care, type Drawn } from "./annotate";
export { encodeJpeg, type JpegOptions } from "./jpeg";
export { sceneTruth, type SceneInstance, type TruthPicture } from "./truth";

/** What is shown and labelled, for sets of pictures that should differ from the demo's. */
export type Variant = {
  /** Colour and coarseness of the beach. */
  ground?: Ground;
  /** Classes of the truth on the shore; what is not among them may still lie about as nobody's object. */
  classes?: readonly ShoreClass[];
  /** What grows in the glasshouse, one kind a picture in turn. */
  species?: readonly [Species, ...Species[]];
};

export type SceneOptions = {
  batch: "wrack-line" | "glasshouse";
  seed: number;
  width?: number;
  height?: number;
  variant?: Variant;
};

export type Scene = {
  /** r, g, b bytes, row by row. */
  raster: { width: number; height: number; data: Uint8Array };
  width: number;
  height: number;
  instances: SceneInstance[];
};

/**
 * A rendered scene with the exact visible outline of each object. The same options give the same bytes on one version
 * of Node. About 2 to 3 s of one core at 1280 x 960; O(pixels).
 *
 * Method: surfaces are meshes drawn with a depth buffer (Catmull, 1974) over a field of heights; light is a sun with
 * soft shadows marched over the relief, a sky that hollows see less of, and highlights (Blinn, 1977; Schlick, 1994).
 */
export function renderScene({ batch, seed, width = 1280, height = 960, variant = {} }: SceneOptions): Scene {
  const random = randomFrom(seed * 7919 + (batch === "glasshouse" ? 17 : 3));
  const {
    ground = "golden",
    classes = LITTER,
    species = ["cabbage", "tomato", "lettuce", "basil"],
  } = variant;
  const { stage, light, lens } =
    batch === "glasshouse"
      ? paintGlasshouse({ seed, width, height, species }, random)
      : paintShore({ seed, width, height, ground, classes }, random);
  const data = develop(expose(stage.film, stage.relief, light), width, height, lens, seed);
  const { owner, fullPx } = stage.film;
  return {
    raster: { width, height, data },
    width,
    height,
    instances: instancesOf({ owner, fullPx, width, height, classNames: stage.classNames }),
  };
}
