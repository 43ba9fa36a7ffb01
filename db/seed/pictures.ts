import type { Reader } from "@/db/client";
import { listImages, type ImageRow } from "@/db/queries/batches";
import type { PictureFile } from "./batches";
import type { ScenePlan } from "./plans";
import { encodeJpeg, renderScene, type Scene } from "./scenes";

const scenes = new Map<string, Scene>();

/** Renders the pictures of a plan, keeping each scene so that annotators can be played on it. */
export async function renderPlan(plan: ScenePlan): Promise<PictureFile[]> {
  const files: PictureFile[] = [];
  for (const [index, seed] of plan.seeds.entries()) {
    const scene = renderScene({ batch: plan.scene, seed });
    const name = `${plan.prefix}-${String(index + 1).padStart(3, "0")}.jpg`;
    scenes.set(name, scene);
    files.push({ name, bytes: await encodeJpeg(scene) });
  }
  return files;
}

/** The scene behind a picture of this run. */
export function sceneOf(fileName: string): Scene {
  const scene = scenes.get(fileName);
  if (!scene) throw new Error(`no scene was rendered for ${fileName}`);
  return scene;
}

/** A settled picture of a batch that has no dispute yet, if there is one. */
export function findSceneCopy(db: Reader, batchId: string): ImageRow | undefined {
  return listImages(db, batchId, { limit: 1000 }).find((image) => image.consensusState === "settled");
}
