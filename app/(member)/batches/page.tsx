import type { Metadata } from "next";
import Link from "next/link";
import { getDb } from "@/db/client";
import { listBatchesOf } from "@/db/queries/batches";
import { listTeamsOf } from "@/db/queries/people";
import { ButtonLink } from "@/components/ui/Button";
import { EmptyState } from "@/components/ui/EmptyState";
import { Percent } from "@/components/ui/Figures";
import { PageHeader } from "@/components/ui/PageHeader";
import { Progress } from "@/components/ui/Progress";
import { Sheet } from "@/components/ui/Sheet";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { BatchMark } from "./_components/BatchMark";

export const metadata: Metadata = { title: "Batches" };

export default async function BatchesPage() {
  const actor = await requirePageActor("requester");
  const teams = listTeamsOf(getDb(), actor.id);
  const batches = listBatchesOf(
    getDb(),
    teams.map((team) => team.id),
  );
  const teamName = new Map(teams.map((team) => [team.id, team.name]));
  const mayPost = teams.some((team) => team.role !== "viewer");
  const newBatch = mayPost ? (
    <ButtonLink href="/batches/new" kind="primary">
      New batch
    </ButtonLink>
  ) : null;
  return (
    <>
      <PageHeader
        title="Batches"
        lead="Pictures that you post together, with one brief, one key and one price."
        actions={newBatch}
      />
      {batches.length === 0 ? (
        <EmptyState title="No batch yet" action={newBatch}>
          A batch takes four steps: pictures, key and brief, quality and pay, and a look at the cost before
          anything is charged.
        </EmptyState>
      ) : (
        <Sheet>
          <Table caption="Batches of your teams">
            <TableHead>
              <HeadCell>Batch</HeadCell>
              <HeadCell>State</HeadCell>
              <HeadCell>Agreed</HeadCell>
              <HeadCell align="end">Pictures</HeadCell>
              <HeadCell align="end">Agreement</HeadCell>
              <HeadCell align="end">Posted</HeadCell>
            </TableHead>
            <TableBody>
              {batches.map((batch) => (
                <Row key={batch.id}>
                  <RowHead>
                    <Link
                      href={
                        batch.status === "draft"
                          ? `/batches/${batch.id}/setup/images`
                          : `/batches/${batch.id}`
                      }
                      className="link"
                    >
                      {batch.title}
                    </Link>
                    {teams.length > 1 ? (
                      <span className="text-muted block text-sm font-normal">
                        {teamName.get(batch.teamId)}
                      </span>
                    ) : null}
                  </RowHead>
                  <Cell label="State">
                    <BatchMark status={batch.status} progress={batch.progress} />
                  </Cell>
                  <Cell label="Agreed" className="md:min-w-40">
                    <Progress
                      label={`Agreed pictures of ${batch.title}`}
                      labelHidden
                      value={batch.progress.images === 0 ? 0 : batch.progress.settled / batch.progress.images}
                      detail={`${batch.progress.settled} of ${batch.progress.images}`}
                    />
                  </Cell>
                  <Cell label="Pictures" figure>
                    {batch.progress.images}
                  </Cell>
                  <Cell label="Agreement" figure>
                    {batch.progress.agreement === null ? (
                      "–"
                    ) : (
                      <Percent fraction={batch.progress.agreement} />
                    )}
                  </Cell>
                  <Cell label="Posted" align="end">
                    {batch.openedAtMs === null ? (
                      <span className="text-muted">not yet</span>
                    ) : (
                      <When at={batch.openedAtMs} form="date" />
                    )}
                  </Cell>
                </Row>
              ))}
            </TableBody>
          </Table>
        </Sheet>
      )}
    </>
  );
}
