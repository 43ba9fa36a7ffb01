import type { Metadata } from "next";
import Link from "next/link";
import { notFound } from "next/navigation";
import { getDb } from "@/db/client";
import { findBatch, findBrief, findImage } from "@/db/queries/batches";
import { findUser } from "@/db/queries/people";
import { findDispute, listRuns, listSimilarDecisions, listSubmissionsOf } from "@/db/queries/work";
import { ERROR_WORDS, FAULT_WORDS, OUTCOME_WORDS } from "@/components/disputes/words";
import { EvidenceView } from "@/components/evidence/EvidenceView";
import { ButtonLink } from "@/components/ui/Button";
import { formatPercent } from "@/components/ui/Figures";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import { StateMark } from "@/components/ui/StateMark";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import type { DisputeDecision } from "@/db/schema/work";
import { requirePageActor } from "@/lib/auth/page";
import { nowMs } from "@/lib/clock";
import { imageEvidence } from "@/lib/market/consensus/imageEvidence";
import { findAppealOf } from "@/lib/market/disputes/appeal";
import { takesTwo } from "@/lib/market/disputes/decideDispute";
import { findEvidence, type EvidenceSummary } from "@/lib/market/disputes/evidence";
import { whyPartial } from "@/lib/market/disputes/impartial";
import { listSteps } from "@/lib/market/disputes/steps";
import { BriefAsShown } from "./_components/BriefAsShown";
import { DecisionForm } from "./_components/DecisionForm";
import { ProposalForm } from "./_components/ProposalForm";

export const metadata: Metadata = { title: "Dispute" };

type Props = { params: Promise<{ disputeId: string }> };

const TITLE = {
  score: "contests a score",
  image: "contests the result of",
  split: "No agreement on",
} as const;

const STEP_WORDS = {
  opened: "opened it",
  proposed: "proposed a decision",
  "sent-back": "sent the proposal back",
  confirmed: "confirmed the proposal",
  decided: "decided it",
  withdrawn: "took it back",
  appealed: "appealed the decision",
} as const;

const ALIKE_WORDS = { error: "same kind of error", class: "same class", batch: "same batch" } as const;

/** A dispute with all its frozen evidence on one screen: picture, outlines, brief, timing, history and money. */
export default async function DisputePage({ params }: Props) {
  const actor = await requirePageActor("admin");
  const { disputeId } = await params;
  const db = getDb();
  const dispute = findDispute(db, disputeId);
  const image = dispute && findImage(db, dispute.imageId);
  const batch = dispute && findBatch(db, dispute.batchId);
  if (!dispute || !batch || !image?.width || !image.height) notFound();
  const summary = dispute.evidence as EvidenceSummary;
  const frozen = findEvidence(db, dispute.id);
  const snapshot = frozen?.snapshot;
  const evidence = imageEvidence(db, image, { runId: summary.runId, named: true, frozen: snapshot });
  const decidedRun = listRuns(db, image.id).find((run) => run.disputeId === dispute.id);
  const opener = dispute.openedBy ? findUser(db, dispute.openedBy) : undefined;
  const nameOf = (userId: string | null) => (userId && findUser(db, userId)?.name) || "an admin";
  const similar = listSimilarDecisions(db, dispute, 8);
  const current = findBrief(db, batch.id);
  const appealed = findAppealOf(db, dispute.id);
  const partial = dispute.status === "open" ? whyPartial(db, dispute, actor.id) : undefined;
  const isOverdue = dispute.status === "open" && dispute.dueAtMs < nowMs();
  const className = evidence.classes.find((entry) => entry.id === dispute.classId)?.name;
  const cited = dispute.citedIds;
  const drawn =
    snapshot?.submissions ??
    listSubmissionsOf(db, image.id).map((row) => ({
      ...row,
      timing: null,
      briefVersion: summary.briefVersion,
    }));
  const labelOf = (submissionId: string) =>
    evidence.nameOf(drawn.find((row) => row.id === submissionId)?.annotatorId ?? "");
  const inWords = (decision: DisputeDecision) =>
    decision.outcome === "pick"
      ? `${OUTCOME_WORDS.pick}, that of ${labelOf(decision.submissionId)}`
      : decision.outcome === "broken"
        ? `set aside, ${FAULT_WORDS[decision.fault]} at fault`
        : OUTCOME_WORDS[decision.outcome];
  return (
    <>
      <PageHeader
        title={
          dispute.kind === "split" && !dispute.appealOf
            ? `${TITLE.split} ${image.fileName}`
            : `${opener?.name ?? "Somebody"} ${dispute.appealOf ? "appeals the decision on" : dispute.kind === "split" ? "contests" : TITLE[dispute.kind]}${dispute.kind === "score" && !dispute.appealOf ? ":" : ""} ${image.fileName}`
        }
        crumbs={[{ href: "/docket", label: "Docket" }]}
        actions={
          dispute.status === "open" && !partial ? (
            <ButtonLink href={dispute.proposal ? "#proposal" : "#decide"}>
              {dispute.proposal ? "Go to the proposal" : "Go to the decision"}
            </ButtonLink>
          ) : null
        }
        lead={
          <>
            <Link className="link" href={`/batches/${batch.id}`}>
              {batch.title}
            </Link>
            , {ERROR_WORDS[dispute.errorKind]}
            {className ? `, ${className}` : ""}
          </>
        }
        marks={
          <>
            <StateMark state={dispute.status === "open" ? "disputed" : "agreed"}>{dispute.status}</StateMark>
            {isOverdue ? <StateMark state="disputed">overdue</StateMark> : null}
          </>
        }
      />
      <div className="grid gap-6">
        <Notice
          kind={dispute.status === "open" ? "caution" : "info"}
          title={dispute.openedBy === null ? "Why it is here" : "In the words of who contests"}
        >
          <p className="whitespace-pre-line">{dispute.reason}</p>
        </Notice>
        {dispute.appealOf ? (
          <Notice
            title="The first decision"
            action={
              <ButtonLink size="small" href={`/docket/${dispute.appealOf}`}>
                Open it
              </ButtonLink>
            }
          >
            {findDispute(db, dispute.appealOf)?.decisionReason}
          </Notice>
        ) : null}
        {dispute.status === "decided" && dispute.decision ? (
          <Notice
            title={`Decided: ${inWords(dispute.decision)}, by ${nameOf(dispute.decidedBy)}${dispute.confirmedBy ? `, confirmed by ${nameOf(dispute.confirmedBy)}` : ""}`}
            action={
              appealed ? (
                <ButtonLink size="small" href={`/docket/${appealed.id}`}>
                  See the appeal
                </ButtonLink>
              ) : null
            }
          >
            <p className="whitespace-pre-line">{dispute.decisionReason}</p>
          </Notice>
        ) : null}
        <Stats>
          <Stat caption="At stake" note="the most that can move">
            <Money cents={dispute.stakeCents} />
          </Stat>
          {dispute.status === "decided" ? (
            <Stat caption="Moved" note="pay of all, in sum">
              <Money cents={dispute.movedCents ?? 0} signed />
            </Stat>
          ) : (
            <Stat caption="Agreement" note={`target ${formatPercent(batch.agreementTarget)}`}>
              {evidence.run ? formatPercent(evidence.run.agreement) : "–"}
            </Stat>
          )}
          <Stat caption="Opened">
            <When at={dispute.openedAtMs} form="relative" />
          </Stat>
          <Stat caption={dispute.status === "open" ? "Due" : "Decided"}>
            <When at={dispute.decidedAtMs ?? dispute.dueAtMs} form="relative" />
          </Stat>
        </Stats>
        {frozen && !frozen.isIntact ? (
          <Notice kind="danger" title="The evidence was changed">
            Its text no longer has the hash that it was frozen with. Do not decide on it; look at the audit
            log.
          </Notice>
        ) : null}
        <Sheet title="Outlines" lead={evidence.run?.result.reason}>
          <EvidenceView
            imageUrl={`/api/images/${image.id}/working`}
            imageName={image.fileName}
            width={image.width}
            height={image.height}
            classes={evidence.classes}
            layers={[
              ...(decidedRun
                ? [
                    {
                      id: "decided",
                      label: "Decided here",
                      kind: "agreed" as const,
                      instances: decidedRun.result.agreed.map((instance, index) => ({
                        id: `decided-${index}`,
                        classId: instance.classId,
                        shape: instance.shape,
                        note: instance.why,
                        mark: "agreed" as const,
                      })),
                    },
                  ]
                : []),
              ...evidence.layers,
            ]}
            heat={evidence.heat}
          />
        </Sheet>
        <Sheet title="Submissions" lead="As they were when this was opened.">
          <Table caption="Submissions for this picture">
            <TableHead>
              <HeadCell>Annotator</HeadCell>
              <HeadCell align="end">Instances</HeadCell>
              <HeadCell>Claimed</HeadCell>
              <HeadCell align="end">Drew for</HeadCell>
              <HeadCell align="end">Brief</HeadCell>
              <HeadCell align="end">Score</HeadCell>
              <HeadCell align="end">Pay</HeadCell>
            </TableHead>
            <TableBody>
              {drawn.map((submission) => (
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
                  <Cell label="Claimed">
                    {submission.timing ? <When at={submission.timing.claimedAtMs} /> : "–"}
                  </Cell>
                  <Cell label="Drew for" figure>
                    {submission.timing ? `${Math.round(submission.timing.activeSeconds)} s` : "–"}
                  </Cell>
                  <Cell label="Brief" figure>
                    {submission.briefVersion}
                  </Cell>
                  <Cell label="Score" figure>
                    {(
                      submission.quality ??
                      evidence.run?.result.scores.find(
                        (score) => score.annotatorId === submission.annotatorId,
                      )?.quality
                    )?.toFixed(2) ?? "–"}
                  </Cell>
                  <Cell label="Pay" figure>
                    {submission.payCents === null ? "–" : <Money cents={submission.payCents} />}
                  </Cell>
                </Row>
              ))}
            </TableBody>
          </Table>
        </Sheet>
        <BriefAsShown
          version={summary.briefVersion}
          briefs={
            snapshot?.briefs ?? [
              {
                version: summary.briefVersion,
                markdown: findBrief(db, batch.id, summary.briefVersion)?.markdown ?? "",
              },
            ]
          }
          current={{ version: current?.version ?? 0, markdown: current?.markdown ?? "" }}
          shownTo={
            dispute.submissionId
              ? `What ${labelOf(dispute.submissionId)} was shown at the claim; the case is judged by it.`
              : "What the first annotator was shown at the claim; the case is judged by it."
          }
        />
        <div className="grid items-start gap-6 lg:grid-cols-2">
          <Sheet title="Earlier decisions like this one" id="similar">
            {similar.length === 0 ? (
              <p className="text-muted">None yet.</p>
            ) : (
              <ul className="divide-line divide-y">
                {similar.map(({ dispute: earlier, fileName, alike }) => (
                  <li key={earlier.id} className="py-2">
                    <Link className="link font-semibold" href={`/docket/${earlier.id}`}>
                      {fileName}: {earlier.decision ? OUTCOME_WORDS[earlier.decision.outcome] : "decided"}
                    </Link>{" "}
                    {cited.includes(earlier.id) ? <StateMark state="agreed">cited</StateMark> : null}
                    <p className="text-sm">{earlier.decisionReason}</p>
                    <p className="text-muted text-sm">{alike.map((one) => ALIKE_WORDS[one]).join(", ")}</p>
                  </li>
                ))}
              </ul>
            )}
          </Sheet>
          <Sheet title="What happened">
            <ol className="divide-line divide-y">
              {listSteps(db, dispute.id).map(({ step, actorName }) => (
                <li key={step.id} className="py-2">
                  <p className="flex flex-wrap justify-between gap-2">
                    <span>
                      {actorName ? `${actorName} ${STEP_WORDS[step.kind]}` : `It was ${step.kind} by itself`}
                    </span>
                    <span className="text-muted text-sm">
                      <When at={step.atMs} />
                    </span>
                  </p>
                  {step.reason && step.kind !== "opened" ? (
                    <p className="text-muted text-sm">{step.reason}</p>
                  ) : null}
                </li>
              ))}
            </ol>
            {frozen ? (
              <div className="border-line mt-4 border-t pt-3 text-sm">
                <p>
                  Evidence frozen <When at={frozen.snapshot.frozenAtMs} />
                  {frozen.isIntact ? ", unchanged since." : "."}
                </p>
                <p className="font-figures text-muted mt-1 break-all">SHA-256 {frozen.sha256}</p>
                <a className="link mt-1 inline-block" href={`/api/disputes/${dispute.id}/evidence`} download>
                  Download the evidence
                </a>
              </div>
            ) : (
              <p className="text-muted mt-4 text-sm">Opened before evidence was kept whole.</p>
            )}
          </Sheet>
        </div>
        {partial ? <Notice title="For another admin">{partial}</Notice> : null}
        {dispute.status === "open" && !partial && dispute.proposal && dispute.proposedAtMs ? (
          <ProposalForm
            disputeId={dispute.id}
            proposedAtMs={dispute.proposedAtMs}
            isOwn={dispute.proposedBy === actor.id}
            summary={`${nameOf(dispute.proposedBy)} proposes: ${inWords(dispute.proposal)}.`}
          >
            <p className="whitespace-pre-line">{dispute.proposalReason}</p>
          </ProposalForm>
        ) : null}
        {dispute.status === "open" && !partial && !dispute.proposal ? (
          <DecisionForm
            disputeId={dispute.id}
            isAppeal={dispute.appealOf !== null}
            takesTwo={takesTwo(dispute)}
            submissions={drawn.map((submission) => ({
              id: submission.id,
              label: evidence.nameOf(submission.annotatorId),
              instances: submission.document.instances.length,
            }))}
            earlier={similar.map(({ dispute: earlier, fileName }) => ({
              id: earlier.id,
              label: `${fileName}: ${earlier.decision ? OUTCOME_WORDS[earlier.decision.outcome] : "decided"}`,
            }))}
          />
        ) : null}
      </div>
    </>
  );
}
