import type { Metadata } from "next";
import Link from "next/link";
import { getDb } from "@/db/client";
import { listWorkOf } from "@/db/queries/work";
import { ButtonLink } from "@/components/ui/Button";
import { EmptyState } from "@/components/ui/EmptyState";
import { Money } from "@/components/ui/Money";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { StateMark } from "@/components/ui/StateMark";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";

export const metadata: Metadata = { title: "Work" };

const PAGE_ROWS = 50;

type Props = { searchParams: Promise<{ before?: string }> };

/** What the annotator handed in, with score and pay of each. */
export default async function WorkPage({ searchParams }: Props) {
  const actor = await requirePageActor("annotator");
  const before = Number((await searchParams).before);
  const rows = listWorkOf(getDb(), actor.id, {
    limit: PAGE_ROWS + 1,
    ...(before > 0 && { beforeMs: before }),
  });
  const page = rows.slice(0, PAGE_ROWS);
  const last = page.at(-1);
  return (
    <>
      <PageHeader
        title="Work"
        lead="Each score is measured against what the others agree on, and each has its reason."
      />
      {page.length === 0 ? (
        <EmptyState
          title="Nothing handed in yet"
          action={
            <ButtonLink href="/board" kind="primary">
              Go to the board
            </ButtonLink>
          }
        >
          What you hand in is listed here, with its score, its pay and the reason for both.
        </EmptyState>
      ) : (
        <Sheet>
          <Table caption="Your submissions">
            <TableHead>
              <HeadCell>Picture</HeadCell>
              <HeadCell>Batch</HeadCell>
              <HeadCell>State</HeadCell>
              <HeadCell align="end">Score</HeadCell>
              <HeadCell align="end">Pay</HeadCell>
              <HeadCell align="end">Handed in</HeadCell>
            </TableHead>
            <TableBody>
              {page.map(({ submission, fileName, batchTitle, consensusState }) => (
                <Row key={submission.id}>
                  <RowHead>
                    <Link className="link" href={`/work/${submission.id}`}>
                      {fileName}
                    </Link>
                  </RowHead>
                  <Cell label="Batch">{batchTitle}</Cell>
                  <Cell label="State">
                    {submission.payCents !== null ? (
                      <StateMark state="agreed">settled</StateMark>
                    ) : consensusState === "split" ? (
                      <StateMark state="disputed">on the docket</StateMark>
                    ) : (
                      <StateMark state="waits">waits for others</StateMark>
                    )}
                  </Cell>
                  <Cell label="Score" figure>
                    {submission.quality === null ? "–" : submission.quality.toFixed(2)}
                  </Cell>
                  <Cell label="Pay" figure>
                    {submission.payCents === null ? "–" : <Money cents={submission.payCents} />}
                  </Cell>
                  <Cell label="Handed in" align="end">
                    <When at={submission.submittedAtMs} form="relative" />
                  </Cell>
                </Row>
              ))}
            </TableBody>
          </Table>
          {rows.length > PAGE_ROWS && last ? (
            <ButtonLink className="mt-4" href={`/work?before=${last.submission.submittedAtMs}`}>
              Earlier work
            </ButtonLink>
          ) : null}
        </Sheet>
      )}
    </>
  );
}
