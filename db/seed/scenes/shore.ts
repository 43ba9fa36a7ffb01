import { layBeach, terrain, type Ground } from "./beach";
import type { ShoreClass } from "./classes";
import { cameraOf, groundBounds } from "./camera";
import { footprints } from "./footprints";
import type { LensPlan } from "./lens";
import { sunOf, type Light } from "./light";
import { between, nearZero, type Random } from "./random";
import { cellCount, Relief } from "./relief";
import { sandSurface } from "./sand";
import { scatter } from "./scatter";
import { Stage } from "./stage";
import { daylight } from "./weather";

export type ShorePlan = {
  seed: number;
  width: number;
  height: number;
  ground: Ground;
  classes: readonly ShoreClass[];
};
export type Painted = { stage: Stage; light: Light; lens: LensPlan };

/** Sand, the water's edge and a wrack line with litter, seen from a pole. */
export function paintShore(plan: ShorePlan, random: Random): Painted {
  const camera = cameraOf(plan.width, plan.height, {
    heightCm: between(random, 125, 190),
    pitch: between(random, 0.82, 1.3),
    roll: nearZero(random) * 0.07,
    fieldOfView: between(random, 0.88, 1.05),
  });
  const [left, near, right, far] = groundBounds(camera);
  const margin = 25;
  const cellCm = Math.max(
    0.22,
    Math.sqrt(((right - left + 2 * margin) * (far - near + 2 * margin)) / cellCount(plan)),
  );
  const relief = new Relief([left - margin, near - margin, right + margin, far + margin], cellCm);
  const beach = layBeach(camera, random);
  const stage = new Stage(camera, relief);
  relief.shape(terrain(beach, plan, random));
  if (random() < 0.55) footprints(relief, beach, [left, near, right, far], random);
  scatter(stage, beach, camera, plan, random);
  const { light, exposure, warmth } = daylight(plan.seed, random);
  relief.settle(sunOf(light));
  relief.finishGround();
  stage.draw();
  stage.film.ground((x, y) => relief.groundAt(x, y), sandSurface(relief, beach, plan));
  return {
    stage,
    light,
    lens: {
      exposure,
      warmth,
      blurPx: between(random, 0.55, 0.75),
      vignette: between(random, 0.12, 0.3),
      noise: between(random, 0.02, 0.045),
    },
  };
}
