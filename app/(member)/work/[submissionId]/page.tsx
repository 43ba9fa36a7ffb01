import type { Metadata } from "next";
import { notFound } from "next/navigation";
import { getDb } from "@/db/client";
import { findBatch, findImage, listClasses } from "@/db/queries/batches";
import { findRun, findSubmission, listDisputesOf } from "@/db/queries/work";
import { EvidenceView, type EvidenceInstance } from "@/components/evidence/EvidenceView";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import { When } from "@/components/ui/When";
import { DisputeNotices } from "@/app/(member)/_disputes/DisputeNotices";
import { requirePageActor } from "@/lib/auth/page";
import { nowMs } from "@/lib/clock";
import type { InstanceOutcome } from "@/lib/consensus/types";
import { env } from "@/lib/env";
import { isParty } from "@/lib/market/disputes/parties";
import { ContestScore } from "./_components/ContestScore";

export const metadata: Metadata = { title: "Your score" };

type Props = { params: Promise<{ submissionId: string }> };

const MARK: Record<InstanceOutcome, NonNullable<EvidenceInstance["mark"]>> = {
  agreed: "agreed",
  loose: "waits",
  "wrong-class": "waits",
  unsupported: "disputed",
  duplicate: "disputed",
};

/** One submission: own outlines against the agreed ones, each with the reason, and the way to contest it. */
export default async function WorkItemPage({ params }: Props) {
  const actor = await requirePageActor("annotator");
  const { submissionId } = await params;
  const db = getDb();
  const submission = findSubmission(db, submissionId);
  if (!submission || submission.annotatorId !== actor.id) notFound();
  const image = findImage(db, submission.imageId);
  const batch = findBatch(db, submission.batchId);
  if (!image?.width || !image.height || !batch) notFound();
  const key = listClasses(db, batch.id).map(({ id, number, name, colour }) => ({ id, number, name, colour }));
  const run = submission.scoredRunId ? findRun(db, submission.scoredRunId) : undefined;
  const score = run?.result.scores.find((entry) => entry.annotatorId === actor.id);
  const outcomes = new Map(score?.instances.map((entry) => [entry.instanceId, entry]));
  const disputes = listDisputesOf(db, batch.id).filter(
    (dispute) => dispute.imageId === image.id && isParty(db, dispute, actor.id),
  );
  const open = disputes.find((dispute) => dispute.status === "open");
  const isDecided = disputes.some(
    (dispute) => dispute.status === "decided" && dispute.subject === submission.id,
  );
  const closesAtMs = run ? run.createdAtMs + batch.disputeWindowHours * 3_600_000 : 0;
  const mayContest = run?.origin === "engine" && !open && !isDecided && nowMs() <= closesAtMs;
  return (
    <>
      <PageHeader
        title={image.fileName}
        crumbs={[{ href: "/work", label: "Work" }]}
        lead={batch.title}
        actions={
          mayContest ? (
            <ContestScore submissionId={submission.id} closesAtMs={closesAtMs} classes={key} />
          ) : null
        }
      />
      <div className="grid gap-6">
        <DisputeNotices disputes={disputes} actorId={actor.id} />
        {score ? (
          <Stats>
            <Stat caption="Score">{score.quality.toFixed(2)}</Stat>
            <Stat caption="Pay">
              {submission.payCents === null ? "–" : <Money cents={submission.payCents} />}
            </Stat>
            <Stat caption="Agreed, missed, unsupported">
              {score.found} · {score.missed} · {score.spurious}
            </Stat>
            <Stat caption="Mean overlap">{score.meanIou === null ? "–" : score.meanIou.toFixed(2)}</Stat>
          </Stats>
        ) : image.consensusState === "void" ? (
          <Stats>
            <Stat caption="Score" note="does not count">
              none
            </Stat>
            <Stat caption="Pay">
              <Money cents={submission.payCents ?? 0} />
            </Stat>
          </Stats>
        ) : (
          <Notice title="Waiting for the others">
            Your score and pay follow when enough people have drawn this picture, and your pay at the latest{" "}
            <When at={submission.submittedAtMs + env().SETTLE_WITHIN_HOURS * 3_600_000} form="relative" />.
          </Notice>
        )}
        <Sheet title="Your outlines and the agreed ones">
          <EvidenceView
            imageUrl={`/api/images/${image.id}/working`}
            imageName={image.fileName}
            width={image.width}
            height={image.height}
            classes={key}
            layers={[
              {
                id: "own",
                label: "Yours",
                kind: "own",
                instances: submission.document.instances.map((instance) => {
                  const outcome = outcomes.get(instance.id);
                  return {
                    id: instance.id,
                    classId: instance.classId,
                    shape: instance.shape,
                    ...(outcome && { note: outcome.why, mark: MARK[outcome.outcome] }),
                  };
                }),
              },
              ...(run
                ? [
                    {
                      id: "agreed",
                      label: run.origin === "decision" ? "Decided" : "Agreed",
                      kind: "agreed" as const,
                      instances: run.result.agreed.map((instance, index) => ({
                        id: String(index),
                        classId: instance.classId,
                        shape: instance.shape,
                      })),
                    },
                  ]
                : []),
            ]}
          />
        </Sheet>
      </div>
    </>
  );
}
