import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listRecentJobs } from "@/db/queries/system";
import { EmptyState } from "@/components/ui/EmptyState";
import { LinkTabs } from "@/components/ui/LinkTabs";
import { PageHeader } from "@/components/ui/PageHeader";
import { Progress } from "@/components/ui/Progress";
import { Sheet } from "@/components/ui/Sheet";
import { StateMark, type MarkState } from "@/components/ui/StateMark";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { jobCounts } from "@/lib/jobs/queue";
import { ReviveButton } from "./_components/ReviveButton";

export const metadata: Metadata = { title: "Jobs" };

const STATUSES = ["running", "queued", "dead", "done", "cancelled"] as const;
type Status = (typeof STATUSES)[number];

const MARK: Record<Status, MarkState> = {
  running: "waits",
  queued: "plain",
  dead: "disputed",
  done: "agreed",
  cancelled: "plain",
};

type Props = { searchParams: Promise<{ show?: string }> };

/** Background work with progress and last error. */
export default async function JobsPage({ searchParams }: Props) {
  await requirePageActor("admin");
  const asked = (await searchParams).show;
  const db = getDb();
  const counts = jobCounts(db);
  const countOf = (status: Status) =>
    counts.filter((row) => row.status === status).reduce((sum, row) => sum + row.count, 0);
  const show = STATUSES.find((status) => status === asked) ?? (countOf("dead") > 0 ? "dead" : "done");
  const jobs = listRecentJobs(db, show, 100);
  return (
    <>
      <PageHeader
        title="Jobs"
        lead="Work that runs behind the pages. A dead job has had all its attempts; look at the error, then give it more."
      />
      <LinkTabs
        label="Jobs"
        tabs={STATUSES.map((status) => ({
          href: `/jobs?show=${status}`,
          label: status,
          count: countOf(status),
          current: status === show,
        }))}
      />
      <div className="mt-6">
        {jobs.length === 0 ? (
          <EmptyState title={`No job is ${show}`} />
        ) : (
          <Sheet>
            <Table caption={`Jobs that are ${show}`}>
              <TableHead>
                <HeadCell>Kind</HeadCell>
                <HeadCell>State</HeadCell>
                <HeadCell align="end">Attempts</HeadCell>
                <HeadCell>Last error</HeadCell>
                <HeadCell align="end">{show === "queued" ? "Due" : "Since"}</HeadCell>
              </TableHead>
              <TableBody>
                {jobs.map((job) => (
                  <Row key={job.id}>
                    <RowHead className="font-figures text-sm">{job.kind}</RowHead>
                    <Cell label="State">
                      {job.status === "running" ? (
                        <Progress
                          label={`Progress of ${job.kind}`}
                          labelHidden
                          value={job.progress || null}
                          detail={job.progressNote}
                        />
                      ) : (
                        <StateMark state={MARK[show]}>{job.status}</StateMark>
                      )}
                    </Cell>
                    <Cell label="Attempts" figure>
                      {job.attempts} / {job.attemptsMax}
                    </Cell>
                    <Cell label="Last error" className="max-w-96 text-sm wrap-anywhere">
                      {job.lastError ?? "–"}
                      {job.status === "dead" ? <ReviveButton jobId={job.id} /> : null}
                    </Cell>
                    <Cell label={show === "queued" ? "Due" : "Since"} align="end">
                      <When at={job.finishedAtMs ?? job.runAtMs} form="relative" />
                    </Cell>
                  </Row>
                ))}
              </TableBody>
            </Table>
          </Sheet>
        )}
      </div>
    </>
  );
}
