import { encodeJpeg, renderScene, type SceneOptions } from "./scenes";

/** Runs on a thread: renders one picture, and answers with its file and its truth. */
export default async function render(options: SceneOptions) {
  const scene = renderScene(options);
  const { width, height, instances } = scene;
  return { bytes: await encodeJpeg(scene), truth: { width, height, instances } };
}
