import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listAudit } from "@/db/queries/system";
import { EmptyState } from "@/components/ui/EmptyState";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { findAuditBreak } from "@/lib/market/audit";

export const metadata: Metadata = { title: "Audit" };

/** Who did what, each entry chained to the one before. */
export default async function AuditPage() {
  await requirePageActor("admin");
  const db = getDb();
  const rows = listAudit(db, 200);
  const broken = findAuditBreak(db);
  return (
    <>
      <PageHeader
        title="Audit"
        lead="Who did what. Each entry carries the hash of the one before, so that a changed or missing one shows."
      />
      <Notice kind={broken === null ? "info" : "danger"} className="mb-6">
        {broken === null
          ? "The chain is unbroken."
          : `The chain breaks at entry ${broken}. Somebody changed the log.`}
      </Notice>
      {rows.length === 0 ? (
        <EmptyState title="Nothing yet" />
      ) : (
        <Sheet>
          <Table caption="Audit log, latest first">
            <TableHead>
              <HeadCell>What</HeadCell>
              <HeadCell>Who</HeadCell>
              <HeadCell>Detail</HeadCell>
              <HeadCell align="end">When</HeadCell>
            </TableHead>
            <TableBody>
              {rows.map(({ entry, actorName }) => (
                <Row key={entry.id}>
                  <RowHead>{entry.action}</RowHead>
                  <Cell label="Who">{actorName ?? "the product"}</Cell>
                  <Cell label="Detail" className="font-figures max-w-[28rem] text-xs wrap-anywhere">
                    {Object.entries(entry.detail)
                      .map(
                        ([name, value]) =>
                          `${name}: ${typeof value === "string" ? value : JSON.stringify(value)}`,
                      )
                      .join(" · ") || "–"}
                  </Cell>
                  <Cell label="When" align="end">
                    <When at={entry.atMs} />
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
