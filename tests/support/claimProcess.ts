import { openDatabase, setDb } from "@/db/client";
import type { Actor } from "@/lib/auth/actor";
import { AppError } from "@/lib/errors";
import { claimTask } from "@/lib/market/work/claimTask";
import { START_MS } from "./market";

/** A process full of annotators who claim as fast as they can; prints what each got, as a JSON list. */
const { file, batchId, actors } = JSON.parse(process.argv[2] ?? "") as {
  file: string;
  batchId: string;
  actors: Actor[];
};
const db = openDatabase(file);
setDb(db);
const outcomes = actors.map((actor) => {
  try {
    claimTask({ actor, nowMs: START_MS, batchId });
    return "held";
  } catch (error) {
    if (error instanceof AppError) return error.code;
    throw error;
  }
});
db.$client.close();
console.log(JSON.stringify(outcomes));
