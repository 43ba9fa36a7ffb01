import path from "node:path";
import Piscina from "piscina";
import type { Reader } from "@/db/client";
import { listImages, type ImageRow } from "@/db/queries/batches";
import type { PictureFile } from "./batches";
import type { ScenePlan } from "./plans";
import type { Scene, SceneOptions } from "./scenes";

export type SceneTruth = Pick<Scene, "width" | "height" | "instances">;

const truths = new Map<string, SceneTruth>();

/** Renders pictures on two threads; ends when they are done. */
export class Renderer {
  private readonly pool = new Piscina<SceneOptions, { bytes: Uint8Array; truth: SceneTruth }>({
    filename: path.resolve(import.meta.dirname, "renderThread.ts"),
    execArgv: ["--import", "tsx"],
    maxThreads: 2,
  });

  /** The pictures of a plan, in order, with the truth of each kept so that annotators can be played on it. */
  async render(plan: ScenePlan): Promise<PictureFile[]> {
    return Promise.all(
      plan.seeds.map(async (seed, index) => {
        const { bytes, truth } = await this.pool.run({ batch: plan.scene, seed });
        const name = `${plan.prefix}-${String(index + 1).padStart(3, "0")}.jpg`;
        truths.set(name, truth);
        return { name, bytes: Buffer.from(bytes) };
      }),
    );
  }

  async close(): Promise<void> {
    await this.pool.close();
  }
}

/** The truth behind a picture of this run. */
export function truthOf(fileName: string): SceneTruth {
  const truth = truths.get(fileName);
  if (!truth) throw new Error(`no scene was rendered for ${fileName}`);
  return truth;
}

/** A settled picture of a batch, if there is one. */
export function findSettled(db: Reader, batchId: string): ImageRow | undefined {
  return listImages(db, batchId, { limit: 1000 }).find((image) => image.consensusState === "settled");
}
