import type { Metadata } from "next";
import Link from "next/link";
import { notFound } from "next/navigation";
import { getDb } from "@/db/client";
import { findBatch, findBrief, findImage } from "@/db/queries/batches";
import { findUser } from "@/db/queries/people";
import { findDispute, listRuns, listSimilarDecisions } from "@/db/queries/work";
import { EvidenceView } from "@/components/evidence/EvidenceView";
import { formatPercent } from "@/components/ui/Figures";
import { Markdown } from "@/components/ui/Markdown";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import { StateMark } from "@/components/ui/StateMark";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { imageEvidence } from "@/lib/market/consensus/imageEvidence";
import { DecisionForm } from "./_components/DecisionForm";

export const metadata: Metadata = { title: "Dispute" };

type Props = { params: Promise<{ disputeId: string }> };

const TITLE = {
  score: "contests a score",
  image: "contests the result of",
  split: "No agreement on",
} as const;
const OUTCOME = { keep: "kept as merged", pick: "one submission picked", redraw: "redrawn" } as const;

/** A dispute with all its evidence on one screen: picture, all outlines, brief, history and money at stake. */
export default async function DisputePage({ params }: Props) {
  const actor = await requirePageActor("admin");
  const { disputeId } = await params;
  const db = getDb();
  const dispute = findDispute(db, disputeId);
  const image = dispute && findImage(db, dispute.imageId);
  const batch = dispute && findBatch(db, dispute.batchId);
  if (!dispute || !batch || !image?.width || !image.height) notFound();
  const frozen = dispute.evidence as { runId: string | null; briefVersion: number };
  const runId = dispute.status === "open" ? frozen.runId : image.currentRunId;
  const evidence = imageEvidence(db, image, { runId, named: true });
  const brief = findBrief(db, batch.id, frozen.briefVersion);
  const opener = dispute.openedBy ? findUser(db, dispute.openedBy) : undefined;
  const decider = dispute.decidedBy ? findUser(db, dispute.decidedBy) : undefined;
  const similar = listSimilarDecisions(db, dispute, 5);
  return (
    <>
      <PageHeader
        title={
          dispute.kind === "split"
            ? `${TITLE.split} ${image.fileName}`
            : `${opener?.name ?? "Somebody"} ${TITLE[dispute.kind]} ${image.fileName}`
        }
        crumbs={[{ href: "/docket", label: "Docket" }]}
        lead={
          <>
            <Link className="link" href={`/batches/${batch.id}`}>
              {batch.title}
            </Link>
          </>
        }
        marks={
          <StateMark state={dispute.status === "open" ? "disputed" : "agreed"}>{dispute.status}</StateMark>
        }
      />
      <div className="grid gap-6">
        <Notice
          kind={dispute.status === "open" ? "caution" : "info"}
          title={dispute.kind === "split" ? "Why it is here" : "In the words of who contests"}
        >
          {dispute.reason}
        </Notice>
        {dispute.status === "decided" && dispute.decision ? (
          <Notice title={`Decided: ${OUTCOME[dispute.decision.outcome]}, by ${decider?.name ?? "an admin"}`}>
            {dispute.decisionReason}
          </Notice>
        ) : null}
        <Stats>
          <Stat caption="At stake" note="the most that can move">
            <Money cents={dispute.stakeCents} />
          </Stat>
          <Stat caption="Agreement" note={`target ${formatPercent(batch.agreementTarget)}`}>
            {evidence.run ? formatPercent(evidence.run.agreement) : "–"}
          </Stat>
          <Stat caption="Opened">
            <When at={dispute.openedAtMs} form="relative" />
          </Stat>
          <Stat caption={dispute.status === "open" ? "Due" : "Decided"}>
            <When at={dispute.decidedAtMs ?? dispute.dueAtMs} form="relative" />
          </Stat>
        </Stats>
        <Sheet title="Outlines" lead={evidence.run?.result.reason}>
          <EvidenceView
            imageUrl={`/api/images/${image.id}/working`}
            imageName={image.fileName}
            width={image.width}
            height={image.height}
            classes={evidence.classes}
            layers={evidence.layers}
            heat={evidence.heat}
          />
        </Sheet>
        <div className="grid items-start gap-6 lg:grid-cols-2">
          <Sheet title="Submissions">
            <Table caption="Submissions for this picture">
              <TableHead>
                <HeadCell>Annotator</HeadCell>
                <HeadCell align="end">Instances</HeadCell>
                <HeadCell align="end">Time</HeadCell>
                <HeadCell align="end">Score</HeadCell>
                <HeadCell align="end">Pay</HeadCell>
              </TableHead>
              <TableBody>
                {evidence.submissions.map((submission) => (
                  <Row key={submission.id}>
                    <RowHead>
                      {evidence.nameOf(submission.annotatorId)}
                      {submission.id === dispute.submissionId ? (
                        <span className="text-muted block text-sm font-normal">contested</span>
                      ) : null}
                    </RowHead>
                    <Cell label="Instances" figure>
                      {submission.document.instances.length}
                    </Cell>
                    <Cell label="Time" figure>
                      {Math.round(submission.activeSeconds)} s
                    </Cell>
                    <Cell label="Score" figure>
                      {submission.quality === null
                        ? (evidence.run?.result.scores
                            .find((score) => score.annotatorId === submission.annotatorId)
                            ?.quality.toFixed(2) ?? "–")
                        : submission.quality.toFixed(2)}
                    </Cell>
                    <Cell label="Pay" figure>
                      {submission.payCents === null ? "–" : <Money cents={submission.payCents} />}
                    </Cell>
                  </Row>
                ))}
              </TableBody>
            </Table>
          </Sheet>
          <Sheet title="History">
            <ol className="divide-line divide-y">
              {listRuns(db, image.id).map((run) => (
                <li key={run.id} className="flex flex-wrap justify-between gap-2 py-2">
                  <span>
                    {run.origin === "decision"
                      ? "Decided by an admin"
                      : `Merged ${run.submissionIds.length} submissions`}
                    : {run.verdict}, {formatPercent(run.agreement)}
                  </span>
                  <span className="text-muted text-sm">
                    <When at={run.createdAtMs} />
                  </span>
                </li>
              ))}
            </ol>
          </Sheet>
        </div>
        <Sheet title={`The brief, version ${brief?.version ?? 0}, as it was shown`}>
          <Markdown>{brief?.markdown ?? ""}</Markdown>
        </Sheet>
        <Sheet title="Earlier decisions like this one">
          {similar.length === 0 ? (
            <p className="text-muted">None yet.</p>
          ) : (
            <ul className="divide-line divide-y">
              {similar.map((earlier) => (
                <li key={earlier.id} className="py-2">
                  <Link className="link font-semibold" href={`/docket/${earlier.id}`}>
                    {earlier.decision ? OUTCOME[earlier.decision.outcome] : earlier.status}
                  </Link>
                  <p className="text-muted text-sm">{earlier.decisionReason}</p>
                </li>
              ))}
            </ul>
          )}
        </Sheet>
        {dispute.status === "open" && dispute.openedBy !== actor.id ? (
          <DecisionForm
            disputeId={dispute.id}
            submissions={evidence.submissions.map((submission) => ({
              id: submission.id,
              label: evidence.nameOf(submission.annotatorId),
              instances: submission.document.instances.length,
            }))}
          />
        ) : null}
      </div>
    </>
  );
}
