import { createHash } from "node:crypto";
import { mkdir, readFile, rename, writeFile } from "node:fs/promises";
import path from "node:path";
import { renderScene, type SceneOptions } from "./index";
import { encodeJpeg } from "./jpeg";
import type { SceneInstance } from "./truth";

/** Raised whenever a picture of the same options would change, so that kept ones are not taken for it. */
const EDITION = 1;

export type KeptScene = {
  jpeg: Buffer;
  truth: { width: number; height: number; instances: SceneInstance[] };
};

/**
 * The scene's JPEG and truth, from the folder if they were kept there, else rendered and kept. Two processes may ask
 * for the same scene at once: files appear whole.
 */
export async function cachedScene(options: SceneOptions, folder: string): Promise<KeptScene> {
  const key = createHash("sha256")
    .update(JSON.stringify([EDITION, options]))
    .digest("hex")
    .slice(0, 16);
  const jpegPath = path.join(folder, `${options.batch}-${options.seed}-${key}.jpg`);
  const truthPath = jpegPath.replace(/jpg$/, "json");
  const kept = await Promise.all([readFile(jpegPath), readFile(truthPath, "utf8")]).catch(
    (error: NodeJS.ErrnoException) => {
      if (error.code !== "ENOENT") throw error;
      return undefined;
    },
  );
  if (kept) {
    const truth: KeptScene["truth"] = JSON.parse(kept[1]);
    return { jpeg: kept[0], truth };
  }
  const scene = renderScene(options);
  const { width, height, instances } = scene;
  const jpeg = await encodeJpeg(scene);
  await mkdir(folder, { recursive: true });
  // The truth goes last: where it is, the picture is whole as well.
  await writeWhole(jpegPath, jpeg);
  await writeWhole(truthPath, JSON.stringify({ width, height, instances }));
  return { jpeg, truth: { width, height, instances } };
}

async function writeWhole(file: string, content: Buffer | string): Promise<void> {
  const draft = `${file}.${process.pid}.part`;
  await writeFile(draft, content);
  await rename(draft, file);
}
