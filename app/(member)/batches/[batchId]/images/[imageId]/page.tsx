import type { Metadata } from "next";
import { notFound } from "next/navigation";
import { getDb } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { getTeamRole } from "@/db/queries/people";
import { listDisputesOf, listRuns } from "@/db/queries/work";
import { EvidenceView } from "@/components/evidence/EvidenceView";
import { EmptyState } from "@/components/ui/EmptyState";
import { formatPercent } from "@/components/ui/Figures";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { DisputeNotices } from "@/app/(member)/_disputes/DisputeNotices";
import { orNotFound, requirePageActor } from "@/lib/auth/page";
import { nowMs } from "@/lib/clock";
import { requireBatch } from "@/lib/market/access";
import { imageEvidence } from "@/lib/market/consensus/imageEvidence";
import { ImageMark } from "../../_components/ImageGrid";
import { ContestImage } from "./_components/ContestImage";

export const metadata: Metadata = { title: "Picture" };

type Props = { params: Promise<{ batchId: string; imageId: string }> };

/** One picture: every annotator's outlines, the agreed ones, and why each is in or out. */
export default async function ImagePage({ params }: Props) {
  const actor = await requirePageActor("requester", "admin");
  const { batchId, imageId } = await params;
  const db = getDb();
  const batch = orNotFound(() => requireBatch(db, batchId, actor));
  const image = findImage(db, imageId);
  if (!image || image.batchId !== batchId || !image.width || !image.height) notFound();
  const evidence = imageEvidence(db, image, { runId: image.currentRunId, named: actor.role === "admin" });
  const { run } = evidence;
  const runs = listRuns(db, imageId);
  const disputes = listDisputesOf(db, batchId).filter((dispute) => dispute.imageId === imageId);
  const isOver = disputes.some(
    (dispute) => dispute.status === "open" || (dispute.status === "decided" && dispute.subject === imageId),
  );
  const role = getTeamRole(db, batch.teamId, actor.id);
  const isInWindow = run !== undefined && nowMs() <= run.createdAtMs + batch.disputeWindowHours * 3_600_000;
  const mayContest =
    (role === "editor" || role === "owner") &&
    image.consensusState === "settled" &&
    run?.origin === "engine" &&
    isInWindow &&
    !isOver;
  return (
    <>
      <PageHeader
        title={image.fileName}
        crumbs={[
          { href: "/batches", label: "Batches" },
          { href: `/batches/${batchId}`, label: batch.title },
        ]}
        marks={<ImageMark state={image.consensusState} />}
        actions={
          mayContest ? (
            <ContestImage imageId={imageId} fileName={image.fileName} classes={evidence.classes} />
          ) : null
        }
      />
      <div className="grid gap-6">
        <DisputeNotices disputes={disputes} actorId={actor.id} />
        {run ? (
          <>
            <p className="max-w-prose">{run.result.reason}</p>
            <Stats>
              <Stat caption="Agreement" note={`target ${formatPercent(batch.agreementTarget)}`}>
                {formatPercent(run.agreement)}
              </Stat>
              <Stat caption="Agreed instances">{run.result.agreed.length}</Stat>
              <Stat
                caption="Expected quality"
                note={`95 % interval ${run.result.predictedQuality.low.toFixed(2)} to ${run.result.predictedQuality.high.toFixed(2)}`}
              >
                {run.result.predictedQuality.value.toFixed(2)}
              </Stat>
              <Stat caption="Submissions">{evidence.submissions.length}</Stat>
            </Stats>
          </>
        ) : null}
        {evidence.layers.length === 0 ? (
          <Sheet>
            <img src={`/api/images/${imageId}/working`} alt={image.fileName} className="w-full" />
            <EmptyState title="Nobody has handed in this picture yet" className="mt-4">
              The outlines appear here as they come in.
            </EmptyState>
          </Sheet>
        ) : (
          <Sheet title="Outlines">
            <EvidenceView
              imageUrl={`/api/images/${imageId}/working`}
              imageName={image.fileName}
              width={image.width}
              height={image.height}
              classes={evidence.classes}
              layers={evidence.layers}
              heat={evidence.heat}
            />
          </Sheet>
        )}
        {run ? (
          <Sheet
            title="People"
            lead="Each is scored against what the others agree on, never against the own vote."
          >
            <Table caption="Annotators of this picture">
              <TableHead>
                <HeadCell>Annotator</HeadCell>
                <HeadCell align="end">Found</HeadCell>
                <HeadCell align="end">Missed</HeadCell>
                <HeadCell align="end">Unsupported</HeadCell>
                <HeadCell align="end">Mean overlap</HeadCell>
                <HeadCell align="end">Score</HeadCell>
              </TableHead>
              <TableBody>
                {run.result.scores.map((score) => (
                  <Row key={score.annotatorId}>
                    <RowHead>{evidence.nameOf(score.annotatorId)}</RowHead>
                    <Cell label="Found" figure>
                      {score.found}
                    </Cell>
                    <Cell label="Missed" figure>
                      {score.missed}
                    </Cell>
                    <Cell label="Unsupported" figure>
                      {score.spurious}
                    </Cell>
                    <Cell label="Mean overlap" figure>
                      {score.meanIou === null ? "–" : score.meanIou.toFixed(2)}
                    </Cell>
                    <Cell label="Score" figure>
                      {score.quality.toFixed(2)}
                    </Cell>
                  </Row>
                ))}
              </TableBody>
            </Table>
          </Sheet>
        ) : null}
        {runs.length > 0 ? (
          <Sheet title="History">
            <ol className="divide-line divide-y">
              {runs.map((entry, index) => (
                <li key={entry.id} className="flex flex-wrap justify-between gap-3 py-2">
                  <span>
                    {entry.origin === "decision"
                      ? "Decided by an admin"
                      : `Merged ${entry.submissionIds.length} submissions`}
                    : {entry.verdict}, agreement {formatPercent(entry.agreement)}
                  </span>
                  <span className="text-muted text-sm">
                    run {index + 1}, <When at={entry.createdAtMs} />
                  </span>
                </li>
              ))}
            </ol>
          </Sheet>
        ) : null}
      </div>
    </>
  );
}
