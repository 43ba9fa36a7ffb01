import { writeFileSync } from "node:fs";
import path from "node:path";
import { calibrate, learnRanker, outcomesOf, type Outcome } from "@/lib/proposals/objectnessLearning";
import { FOLDS, printRecalls, readLearningPictures, recallsOf } from "./photographs";

/**
 * Learns the weights of the class-agnostic ranking from 51 photographs of COCO 2017 under CC BY 2.0 and CC BY-SA 2.0
 * (attribution beside the pictures), prints what cross-validation over photographs says of them, and writes them down.
 */
async function main(): Promise<void> {
  const { pictures, cpuSeconds } = await readLearningPictures();
  const outcomes: Outcome[] = [];
  const ranked = pictures.map(() => ({ boxes: [] as ReturnType<typeof outcomesOf>["boxes"] }));
  for (let fold = 0; fold < FOLDS; fold++) {
    const ranker = learnRanker(pictures.filter((_, n) => n % FOLDS !== fold));
    pictures.forEach((picture, n) => {
      if (n % FOLDS !== fold) return;
      const found = outcomesOf(picture, ranker, 1000);
      outcomes.push(...found.outcomes.slice(0, 100));
      ranked[n] = { boxes: found.boxes };
    });
  }
  console.log(`${cpuSeconds.toFixed(2)} CPU s a photograph for candidates and features`);
  printRecalls("learned ranking, cross-validated", recallsOf(pictures, ranked));
  const weights = { ranker: rounded(learnRanker(pictures)), ...calibrate(outcomes) };
  writeFileSync(
    path.resolve("lib/proposals/weights/objectness.ts"),
    `import type { ObjectnessWeights } from "../objectness";

/**
 * Made by lib/cli/learnObjectness.ts from 51 photographs of COCO 2017 (Lin et al., 2014) under CC BY 2.0 and CC BY-SA 2.0;
 * annotations CC BY 4.0, COCO Consortium. The numbers contain no part of a photograph.
 */
export const OBJECTNESS: ObjectnessWeights = ${JSON.stringify(weights)};
`,
  );
}

function rounded<T>(value: T): T {
  return JSON.parse(
    JSON.stringify(value, (_, entry: unknown) =>
      typeof entry === "number" ? Number(entry.toPrecision(5)) : entry,
    ),
  ) as T;
}

main().catch((error: unknown) => {
  console.error(error);
  process.exit(1);
});
