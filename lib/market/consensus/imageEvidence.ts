import type { Reader } from "@/db/client";
import { listClasses, type ImageRow } from "@/db/queries/batches";
import { findUser } from "@/db/queries/people";
import { findRun, listSubmissionsOf, type RunRow, type SubmissionRow } from "@/db/queries/work";
import { heatMap } from "@/lib/consensus/heatMap";
import type { InstanceOutcome } from "@/lib/consensus/types";
import { labelsOf } from "./settleImage";

type Note = { note: string; mark: "agreed" | "waits" | "disputed" | "plain" };

const MARK: Record<InstanceOutcome, Note["mark"]> = {
  agreed: "agreed",
  loose: "waits",
  "wrong-class": "waits",
  unsupported: "disputed",
  duplicate: "disputed",
};

type Run = Pick<RunRow, "id" | "origin" | "agreement" | "verdict" | "result" | "createdAtMs">;
type Drawn = Pick<SubmissionRow, "id" | "annotatorId" | "document" | "quality" | "payCents">;

type Options = {
  runId: string | null;
  named: boolean;
  /** What was frozen for a dispute, in place of what is there now. */
  frozen?: { runs: readonly Run[]; submissions: readonly Drawn[] } | undefined;
};

/**
 * Everything that was drawn on one image, as layers of outlines with the reason for each in words. With
 * `named` the annotators' names are shown (admins); otherwise they are numbered in the order they handed in.
 */
export function imageEvidence(db: Reader, image: ImageRow, { runId, named, frozen }: Options) {
  const run: Run | undefined = frozen
    ? frozen.runs.find((entry) => entry.id === runId)
    : runId
      ? findRun(db, runId)
      : undefined;
  const list: readonly Drawn[] = frozen?.submissions ?? listSubmissionsOf(db, image.id);
  const key = listClasses(db, image.batchId).map(({ id, number, name, colour }) => ({
    id,
    number,
    name,
    colour,
  }));
  const labelOf = new Map(
    list.map((submission, index) => [
      submission.annotatorId,
      named ? (findUser(db, submission.annotatorId)?.name ?? "Annotator") : `Annotator ${index + 1}`,
    ]),
  );
  const heat = list.length >= 2 ? heatMap(labelsOf(image, list)) : null;
  return {
    run,
    submissions: list,
    classes: key,
    nameOf: (annotatorId: string) => labelOf.get(annotatorId) ?? "Annotator",
    layers: [
      ...(run ? [agreedLayer(run)] : []),
      ...list.map((submission) =>
        personLayer(submission, run, labelOf.get(submission.annotatorId) ?? "Annotator"),
      ),
    ],
    heat: heat
      ? { width: heat.width, height: heat.height, cellPx: heat.cellPx, values: [...heat.values] }
      : null,
  };
}

function agreedLayer(run: Run) {
  return {
    id: "agreed",
    label: run.origin === "decision" ? "Decided" : "Agreed",
    kind: "agreed" as const,
    instances: run.result.agreed.map((instance, index) => ({
      id: String(index),
      classId: instance.classId,
      shape: instance.shape,
      note: instance.why,
      mark: "agreed" as const,
    })),
  };
}

function personLayer(submission: Drawn, run: Run | undefined, label: string) {
  const score = run?.result.scores.find((entry) => entry.annotatorId === submission.annotatorId);
  const leftOut = new Map(
    run?.result.leftOut
      .filter((entry) => entry.annotatorId === submission.annotatorId)
      .map((entry) => [entry.instanceId, entry.why]),
  );
  const outcomeOf = new Map(score?.instances.map((entry) => [entry.instanceId, entry]));
  return {
    id: submission.id,
    label,
    kind: "person" as const,
    shownFirst: false,
    instances: submission.document.instances.map((instance) => {
      const outcome = outcomeOf.get(instance.id);
      const note = leftOut.get(instance.id) ?? outcome?.why;
      return {
        id: instance.id,
        classId: instance.classId,
        shape: instance.shape,
        ...(note !== undefined && { note }),
        ...(outcome && { mark: MARK[outcome.outcome] }),
      };
    }),
  };
}
