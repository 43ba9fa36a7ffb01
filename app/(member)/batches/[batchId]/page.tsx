import type { Metadata } from "next";
import Link from "next/link";
import { redirect } from "next/navigation";
import { getDb } from "@/db/client";
import { countWork, findBrief, listClasses, listImages, listReleases } from "@/db/queries/batches";
import { findLatestTraining } from "@/db/queries/models";
import { countAcceptance, findPredictionImport } from "@/db/queries/proposals";
import { getTeamRole } from "@/db/queries/people";
import { listAnnotatorsOf, listCurrentRuns, listDisputesOf, measureBatch } from "@/db/queries/work";
import { Bars } from "@/components/ui/Bars";
import { ButtonLink } from "@/components/ui/Button";
import { ClassSwatch } from "@/components/ui/ClassSwatch";
import { EmptyState } from "@/components/ui/EmptyState";
import { formatDuration, formatPercent } from "@/components/ui/Figures";
import { LineChart } from "@/components/ui/LineChart";
import { Markdown } from "@/components/ui/Markdown";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { orNotFound, requirePageActor } from "@/lib/auth/page";
import { requireBatch } from "@/lib/market/access";
import { batchStatus } from "@/lib/market/batches/batchStatus";
import { savingsOf } from "@/lib/market/proposals/savings";
import { batchMoney } from "@/lib/market/money/queries";
import { BatchMark } from "../_components/BatchMark";
import { BatchActions } from "./_components/BatchActions";
import { BatchProgress } from "./_components/BatchProgress";
import { ImageGrid } from "./_components/ImageGrid";
import { ProposalsPanel } from "./_components/ProposalsPanel";
import { Releases } from "./_components/Releases";
import { TargetPanel } from "./_components/TargetPanel";

export const metadata: Metadata = { title: "Batch" };

type Props = { params: Promise<{ batchId: string }> };

/** Everything about one batch: how far it is, what it costs, how well people agree, and its releases. */
export default async function BatchPage({ params }: Props) {
  const actor = await requirePageActor("requester", "admin");
  const { batchId } = await params;
  const db = getDb();
  const batch = orNotFound(() => requireBatch(db, batchId, actor));
  const teamRole = getTeamRole(db, batch.teamId, actor.id);
  const mayEdit = teamRole === "editor" || teamRole === "owner";
  if (batch.status === "draft") {
    if (mayEdit) redirect(`/batches/${batchId}/setup/images`);
    return <EmptyState title="Not posted yet">{batch.title} is still being prepared.</EmptyState>;
  }
  const status = batchStatus({ actor, batchId });
  const key = listClasses(db, batchId);
  const brief = findBrief(db, batchId);
  const images = listImages(db, batchId, { limit: 1000 });
  const runs = listCurrentRuns(db, batchId);
  const people = listAnnotatorsOf(db, batchId);
  const disputes = listDisputesOf(db, batchId);
  const measured = measureBatch(db, batchId);
  const money = batchMoney(db, batchId);
  const training = findLatestTraining(db, batchId);
  const settledRuns = runs.filter(({ image }) => image.consensusState === "settled");
  const instances = settledRuns.flatMap(({ run }) => run.result.agreed);
  const perClass = key.map((row) => {
    const own = instances.filter((instance) => instance.classId === row.id);
    const mean =
      own.length === 0 ? 0 : own.reduce((sum, instance) => sum + instance.predictedIou, 0) / own.length;
    return { row, count: own.length, mean };
  });
  const byTime = [...settledRuns].sort((a, b) => (a.image.settledAtMs ?? 0) - (b.image.settledAtMs ?? 0));
  const agreement = byTime.map(({ run }, index) => ({ x: index + 1, y: run.agreement }));
  const { live } = countWork(db, batchId);
  const openDisputes = disputes.filter((dispute) => dispute.status === "open");
  return (
    <>
      <PageHeader
        title={batch.title}
        crumbs={
          actor.role === "admin"
            ? [{ href: "/docket", label: "Docket" }]
            : [{ href: "/batches", label: "Batches" }]
        }
        marks={<BatchMark status={batch.status} progress={status.progress} />}
        actions={
          mayEdit ? (
            <BatchActions
              batch={{ id: batch.id, title: batch.title, status: batch.status }}
              remainingCents={money.remainingCents}
              live={live}
              openDisputes={openDisputes.length}
            />
          ) : null
        }
      />
      <div className="grid gap-6">
        {batch.safetyCritical ? (
          <Notice kind="caution" title="Feeds a safety-critical system">
            Have each release reviewed by people qualified in that field. Agreement between annotators is not
            proof of correctness.
          </Notice>
        ) : null}
        {measured.hourlyCents !== null &&
        measured.tasks >= 10 &&
        measured.hourlyCents < batch.floorHourlyCents &&
        batch.status === "open" ? (
          <Notice kind="caution" title="Pay measures below your floor">
            The median is <Money cents={Math.round(measured.hourlyCents)} /> an hour over {measured.tasks}{" "}
            tasks; your floor is <Money cents={batch.floorHourlyCents} />. Annotators see this figure before
            they accept. Minimum pay is a matter of local law.
          </Notice>
        ) : null}
        <BatchProgress batchId={batchId} initial={status} />
        <Stats>
          <Stat caption="Agreement, settled pictures">
            {status.progress?.agreement == null ? "–" : formatPercent(status.progress.agreement)}
          </Stat>
          <Stat caption="Agreed instances">{instances.length}</Stat>
          <Stat
            caption="Spent, of held"
            note={
              <>
                of <Money cents={money.fundedCents} />
              </>
            }
          >
            <Money cents={money.releasedCents + money.feeCents} />
          </Stat>
          <Stat
            caption="Median pay an hour"
            note={`${measured.tasks} tasks${measured.medianSeconds === null ? "" : `, ${formatDuration(measured.medianSeconds * 1000)} each`}`}
          >
            {measured.hourlyCents === null ? "–" : <Money cents={Math.round(measured.hourlyCents)} />}
          </Stat>
        </Stats>
        <Sheet title="Pictures" id="pictures">
          <ImageGrid
            batchId={batchId}
            images={images
              .filter((image) => image.status === "ready")
              .map(({ id, fileName, consensusState, submitted, slotsWanted, agreement: own }) => ({
                id,
                fileName,
                consensusState,
                submitted,
                slotsWanted,
                agreement: own,
              }))}
          />
        </Sheet>
        <div className="grid gap-6 lg:grid-cols-2">
          <Sheet title="Agreement over time">
            {agreement.length < 2 ? (
              <p className="text-muted">Two settled pictures make the first line.</p>
            ) : (
              <LineChart
                title="Agreement of settled pictures, in the order they were settled"
                series={[{ name: "Agreement", points: agreement }]}
                xLabel="settled pictures"
                yLabel="agreement"
                yRange={[0, 1]}
                formatY={(y) => `${Math.round(y * 100)} %`}
                target={{ y: batch.agreementTarget, label: "target" }}
              />
            )}
          </Sheet>
          <Sheet
            title="Quality by class"
            lead="Expected overlap (IoU) of the agreed outlines with the truth."
          >
            {instances.length === 0 ? (
              <p className="text-muted">Nothing is settled yet.</p>
            ) : (
              <Bars
                label="Expected overlap by class"
                max={1}
                bars={perClass.map(({ row, count, mean }) => ({
                  label: (
                    <ClassSwatch number={row.number} colour={row.colour} name={`${row.name} (${count})`} />
                  ),
                  value: mean,
                  text: count === 0 ? "none" : mean.toFixed(2),
                }))}
              />
            )}
          </Sheet>
        </div>
        <Sheet title="Annotators">
          {people.length === 0 ? (
            <p className="text-muted">Nobody has handed in work yet.</p>
          ) : (
            <Table caption="Annotators of this batch">
              <TableHead>
                <HeadCell>Annotator</HeadCell>
                <HeadCell align="end">Submissions</HeadCell>
                <HeadCell align="end">Mean score</HeadCell>
                <HeadCell align="end">Paid</HeadCell>
                <HeadCell align="end">Time a task</HeadCell>
              </TableHead>
              <TableBody>
                {people.map((person, index) => (
                  <Row key={person.annotatorId}>
                    <RowHead>{actor.role === "admin" ? person.name : `Annotator ${index + 1}`}</RowHead>
                    <Cell label="Submissions" figure>
                      {person.submissions}
                    </Cell>
                    <Cell label="Mean score" figure>
                      {person.quality === null ? "–" : person.quality.toFixed(2)}
                    </Cell>
                    <Cell label="Paid" figure>
                      <Money cents={person.payCents} />
                    </Cell>
                    <Cell label="Time a task" figure>
                      {formatDuration((person.seconds * 1000) / person.submissions)}
                    </Cell>
                  </Row>
                ))}
              </TableBody>
            </Table>
          )}
        </Sheet>
        <div className="grid items-start gap-6 lg:grid-cols-2">
          {mayEdit && batch.status !== "closed" ? (
            <TargetPanel
              batchId={batchId}
              target={batch.agreementTarget}
              kMin={batch.kMin}
              kMax={batch.kMax}
              capCents={batch.capCents}
              feeBps={batch.feeBps}
              agreements={runs.map(({ run, image }) => ({
                agreement: run.agreement,
                submissions: run.submissionIds.length,
                state: image.consensusState,
              }))}
              medianPayCents={measured.medianPayCents}
            />
          ) : null}
          <ProposalsPanel
            batchId={batchId}
            training={training}
            savings={savingsOf(countAcceptance(db, batchId), measured.hourlyCents)}
            imported={findPredictionImport(db, batchId)}
            mayImport={mayEdit && batch.status !== "closed"}
          />
        </div>
        <Releases
          batchId={batchId}
          releases={listReleases(db, batchId)}
          settled={status.progress?.settled ?? 0}
        />
        <Sheet title="Disputes">
          {disputes.length === 0 ? (
            <p className="text-muted">
              None. You can contest the result of a picture on its own page within {batch.disputeWindowHours}{" "}
              hours.
            </p>
          ) : (
            <ul className="divide-line divide-y">
              {disputes.map((dispute) => (
                <li key={dispute.id} className="flex flex-wrap justify-between gap-3 py-2">
                  <Link className="link" href={`/batches/${batchId}/images/${dispute.imageId}`}>
                    {images.find((image) => image.id === dispute.imageId)?.fileName ?? "Picture"}
                  </Link>
                  <span className="text-muted text-sm">
                    {dispute.kind === "split"
                      ? "could not agree"
                      : dispute.kind === "score"
                        ? "an annotator contests a score"
                        : "contested by the team"}
                    , {dispute.status} <When at={dispute.decidedAtMs ?? dispute.openedAtMs} form="relative" />
                  </span>
                </li>
              ))}
            </ul>
          )}
        </Sheet>
        <Sheet
          title={`The brief, version ${brief?.version ?? 0}`}
          actions={
            mayEdit && batch.status !== "closed" ? (
              <ButtonLink size="small" href={`/batches/${batchId}/setup/key`}>
                Correct it
              </ButtonLink>
            ) : null
          }
        >
          <ul className="mb-4 flex flex-wrap gap-x-6 gap-y-2" aria-label="The key">
            {key.map((row) => (
              <li key={row.id}>
                <ClassSwatch number={row.number} colour={row.colour} name={row.name} />
              </li>
            ))}
          </ul>
          <Markdown>{brief?.markdown ?? ""}</Markdown>
        </Sheet>
      </div>
    </>
  );
}
