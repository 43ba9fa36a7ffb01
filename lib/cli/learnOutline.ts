import { writeFileSync } from "node:fs";
import path from "node:path";
import { learnOutline } from "@/lib/vision/outlineLearning";
import { readOutlineExamples } from "./photographs";

/**
 * Learns the weights of `outlineInBox` from the objects over 32² px of 51 photographs of COCO 2017 under CC BY 2.0 and
 * CC BY-SA 2.0 (attribution beside the pictures) and writes them down. What cross-validation says of them is
 * printed by tests/bench/outline.ts.
 */
async function main(): Promise<void> {
  const examples = await readOutlineExamples();
  const weights = learnOutline(examples);
  const text = JSON.stringify(weights, (_, value: unknown) =>
    typeof value === "number" ? Number(value.toPrecision(5)) : value,
  );
  writeFileSync(
    path.resolve("lib/vision/weights/outline.ts"),
    `import type { OutlineWeights } from "../outline";

/**
 * Made by lib/cli/learnOutline.ts from 51 photographs of COCO 2017 (Lin et al., 2014) under CC BY 2.0 and CC BY-SA 2.0;
 * annotations CC BY 4.0, COCO Consortium. The numbers contain no part of a photograph.
 */
export const OUTLINE_WEIGHTS: OutlineWeights = ${text};
`,
  );
  console.log(`learned from ${examples.length} objects; ${(text.length / 1024).toFixed(0)} KiB of weights`);
}

main().catch((error: unknown) => {
  console.error(error);
  process.exit(1);
});
