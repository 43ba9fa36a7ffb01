import { getDb, setDb, openDatabase } from "@/db/client";
import { setTimeout as sleep } from "node:timers/promises";
import { listClasses, listImages } from "@/db/queries/batches";
import { stackEnv } from "@/lib/cli/stack";
import { postBatch } from "@/db/seed/batches";
import { DEMO_PASSWORD, seedPeople } from "@/db/seed/people";
import { ensureBucket } from "@/lib/services/store";
import { claimTask } from "@/lib/market/work/claimTask";
import type { Stack } from "./stack";

type Class = { name: string; geometry: "box" | "polygon" };

const COLOURS = ["#0072b2", "#d55e00", "#009e73"];

/**
 * The demo's people and one open, funded batch of these pictures, made through the use cases on the stack's own
 * database while its worker checks the pictures. Waits until every picture has its proposals.
 */
export async function openBatch(
  stack: Stack,
  pictures: readonly { name: string; bytes: Buffer }[],
  classes: readonly Class[] = [{ name: "float", geometry: "box" }],
) {
  Object.assign(process.env, stackEnv(stack.plan));
  setDb(openDatabase(stack.databaseFile));
  await ensureBucket();
  const db = getDb();
  const { actors, teamId } = await seedPeople(db, Date.now());
  const batchId = await postBatch({
    actor: actors.ines,
    teamId,
    nowMs: Date.now(),
    plan: {
      title: "Wrack line, test",
      classes: classes.map(({ name, geometry }, index) => ({
        number: index + 1,
        name,
        colour: COLOURS[index % COLOURS.length] ?? "#0072b2",
        pattern: "solid",
        geometry,
      })),
      brief: "Draw every float.",
      pictures: [...pictures],
      kMin: 3,
      kMax: 5,
      agreementTarget: 0.6,
      expectedInstances: 4,
      pay: { baseCents: 20, boxCents: 5, polygonCents: 12, capCents: 300 },
    },
  });
  while (listImages(db, batchId, { limit: 100 }).some((image) => image.proposalState !== "done"))
    await sleep(200);
  const images = listImages(db, batchId, { limit: 100 });
  return {
    db,
    actors,
    batchId,
    images,
    classes: listClasses(db, batchId),
    password: DEMO_PASSWORD,
    /** A claim of a picture for one of the people; returns its id. */
    claim: (who: keyof typeof actors, imageId = images[0]?.id ?? "") =>
      claimTask({ actor: actors[who], nowMs: Date.now(), batchId, imageId }).id,
  };
}
