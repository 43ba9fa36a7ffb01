"use server";

import { z } from "zod";
import { getDb } from "@/db/client";
import { nowMs } from "@/lib/clock";
import { AppError } from "@/lib/errors";
import { action } from "@/lib/http/action";
import { reviveJob } from "@/lib/jobs/queue";

/** Gives a dead job another set of attempts. */
export const revive = action({ role: "admin", input: z.object({ jobId: z.string() }) }, ({ input }) => {
  if (!reviveJob(getDb(), input.jobId, nowMs()))
    throw new AppError("conflict", "This job is not dead any more.");
  return {};
});
