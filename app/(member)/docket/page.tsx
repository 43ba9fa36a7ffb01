import type { Metadata } from "next";
import Link from "next/link";
import { getDb } from "@/db/client";
import { listDocket } from "@/db/queries/work";
import { EmptyState } from "@/components/ui/EmptyState";
import { LinkTabs } from "@/components/ui/LinkTabs";
import { Money } from "@/components/ui/Money";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { StateMark } from "@/components/ui/StateMark";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { nowMs } from "@/lib/clock";

export const metadata: Metadata = { title: "Docket" };

type Props = { searchParams: Promise<{ show?: string }> };

const KIND = { score: "a score", image: "a picture", split: "no agreement" } as const;
const OUTCOME = { keep: "kept", pick: "one picked", redraw: "redrawn" } as const;

/** Disputes to decide, the most urgent first; and those that were decided. */
export default async function DocketPage({ searchParams }: Props) {
  await requirePageActor("admin");
  const show = (await searchParams).show === "decided" ? "decided" : "open";
  const db = getDb();
  const rows = listDocket(db, show);
  const openCount = show === "open" ? rows.length : listDocket(db, "open").length;
  const now = nowMs();
  return (
    <>
      <PageHeader
        title="Docket"
        lead="What people could not agree on. Each decision needs a reason, and both sides read it."
      />
      <LinkTabs
        label="Docket"
        tabs={[
          { href: "/docket", label: "To decide", count: openCount, current: show === "open" },
          { href: "/docket?show=decided", label: "Decided", current: show === "decided" },
        ]}
      />
      <div className="mt-6">
        {rows.length === 0 ? (
          <EmptyState title={show === "open" ? "Nothing to decide" : "Nothing decided yet"}>
            {show === "open"
              ? "Contested scores, contested pictures and pictures without agreement come here by themselves."
              : "Decisions are kept here with their reasons."}
          </EmptyState>
        ) : (
          <Sheet>
            <Table caption={show === "open" ? "Open disputes" : "Decided disputes"}>
              <TableHead>
                <HeadCell>Picture</HeadCell>
                <HeadCell>Contested</HeadCell>
                <HeadCell>Reason given</HeadCell>
                <HeadCell align="end">At stake</HeadCell>
                <HeadCell align="end">{show === "open" ? "Due" : "Decided"}</HeadCell>
              </TableHead>
              <TableBody>
                {rows.map(({ dispute, fileName, batchTitle, openerName }) => (
                  <Row key={dispute.id}>
                    <RowHead>
                      <Link className="link" href={`/docket/${dispute.id}`}>
                        {fileName}
                      </Link>
                      <span className="text-muted block text-sm font-normal">{batchTitle}</span>
                    </RowHead>
                    <Cell label="Contested">
                      <StateMark state={show === "open" ? "disputed" : "agreed"}>
                        {show === "decided" && dispute.decision
                          ? OUTCOME[dispute.decision.outcome]
                          : KIND[dispute.kind]}
                      </StateMark>
                      <span className="text-muted block text-sm">{openerName ?? "by itself"}</span>
                    </Cell>
                    <Cell label="Reason given" className="max-w-80">
                      <span className="line-clamp-2">{dispute.decisionReason ?? dispute.reason}</span>
                    </Cell>
                    <Cell label="At stake" figure>
                      <Money
                        cents={show === "open" ? dispute.stakeCents : (dispute.movedCents ?? 0)}
                        signed={show === "decided"}
                      />
                    </Cell>
                    <Cell label={show === "open" ? "Due" : "Decided"} align="end">
                      {show === "open" && dispute.dueAtMs < now ? (
                        <StateMark state="disputed">overdue</StateMark>
                      ) : null}{" "}
                      <When at={dispute.decidedAtMs ?? dispute.dueAtMs} form="relative" />
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
