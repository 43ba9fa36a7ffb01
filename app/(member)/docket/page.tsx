import type { Metadata } from "next";
import Link from "next/link";
import { getDb } from "@/db/client";
import { listDocket } from "@/db/queries/work";
import { ERROR_WORDS, OUTCOME_WORDS } from "@/components/disputes/words";
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
import { takesTwo } from "@/lib/market/disputes/decideDispute";
import { whyPartial } from "@/lib/market/disputes/impartial";

export const metadata: Metadata = { title: "Docket" };

type Props = { searchParams: Promise<{ show?: string }> };

/** Disputes to decide, the most urgent first; and those that were decided. */
export default async function DocketPage({ searchParams }: Props) {
  const actor = await requirePageActor("admin");
  const show = (await searchParams).show === "decided" ? "decided" : "open";
  const db = getDb();
  const now = nowMs();
  const rows = listDocket(db, show, now);
  const openCount = show === "open" ? rows.length : listDocket(db, "open", now).length;
  return (
    <>
      <PageHeader
        title="Docket"
        lead="What people could not agree on: overdue first, then by money at stake and time waited. Each decision needs a reason, and both sides read it."
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
              ? "Contested scores, contested pictures, appeals and pictures without agreement come here by themselves."
              : "Decisions are kept here with their reasons."}
          </EmptyState>
        ) : (
          <Sheet>
            <Table caption={show === "open" ? "Open disputes" : "Decided disputes"}>
              <TableHead>
                <HeadCell>Picture</HeadCell>
                <HeadCell>{show === "open" ? "Contested" : "Outcome"}</HeadCell>
                <HeadCell>Reason given</HeadCell>
                <HeadCell align="end">{show === "open" ? "At stake" : "Moved"}</HeadCell>
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
                    <Cell label={show === "open" ? "Contested" : "Outcome"}>
                      <span>
                        <StateMark state={show === "open" ? "disputed" : "agreed"}>
                          {dispute.appealOf ? "appeal: " : ""}
                          {show === "decided" && dispute.decision
                            ? OUTCOME_WORDS[dispute.decision.outcome]
                            : ERROR_WORDS[dispute.errorKind]}
                        </StateMark>
                        <span className="text-muted block text-sm">
                          {openerName ?? "by itself"}
                          {show === "open" && whyPartial(db, dispute, actor.id)
                            ? ", for another admin"
                            : dispute.status === "open" && dispute.proposal
                              ? dispute.proposedBy === actor.id
                                ? ", your proposal waits"
                                : ", to confirm"
                              : show === "open" && takesTwo(dispute)
                                ? ", takes two admins"
                                : ""}
                        </span>
                      </span>
                    </Cell>
                    <Cell label="Reason given" className="max-w-80">
                      <span className="line-clamp-2">{dispute.decisionReason ?? dispute.reason}</span>
                    </Cell>
                    <Cell label={show === "open" ? "At stake" : "Moved"} figure>
                      <Money
                        cents={show === "open" ? dispute.stakeCents : (dispute.movedCents ?? 0)}
                        signed={show === "decided"}
                      />
                    </Cell>
                    <Cell label={show === "open" ? "Due" : "Decided"} align="end">
                      <span>
                        {show === "open" && dispute.dueAtMs < now ? (
                          <StateMark state="disputed">overdue</StateMark>
                        ) : null}{" "}
                        <When at={dispute.decidedAtMs ?? dispute.dueAtMs} form="relative" />
                      </span>
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
