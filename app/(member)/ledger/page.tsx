import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { ledgerViolations, listOpenAlerts, listPostings, trialBalance } from "@/db/queries/ledger";
import { EmptyState } from "@/components/ui/EmptyState";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableFoot, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { ReconcileButton } from "./ReconcileButton";

export const metadata: Metadata = { title: "Ledger" };

const MEANING: Record<string, string> = {
  stripe: "With Stripe (the other side)",
  wallet: "Wallets of teams",
  escrow: "Escrow of batches",
  payable: "Payable to annotators",
  transit: "On the way to annotators",
  debt: "Owed by annotators",
  fee: "Platform fee",
  processing: "Card processing",
  hold: "Held for card disputes",
  loss: "Lost to card disputes",
  suspense: "Suspense",
  refunding: "On the way back to cards",
  shortfall: "Corrections the platform paid",
};

/** The platform's money: trial balance, alerts, and the latest postings with their entries. */
export default async function LedgerPage() {
  await requirePageActor("admin");
  const db = getDb();
  const balance = trialBalance(db);
  const sum = balance.reduce((total, row) => total + row.cents, 0);
  const violations = ledgerViolations(db);
  const alerts = listOpenAlerts(db);
  const postings = listPostings(db, 60);
  return (
    <>
      <PageHeader
        title="Ledger"
        lead="Double entry, append-only, in whole cents."
        actions={<ReconcileButton />}
      />
      <div className="grid gap-6">
        {violations.length === 0 && sum === 0 ? (
          <Notice title="It balances">
            Every posting sums to zero, and every balance equals its entries.
          </Notice>
        ) : (
          <Notice kind="danger" title="It does not balance">
            <ul>
              {violations.map((violation) => (
                <li key={violation}>{violation}</li>
              ))}
            </ul>
          </Notice>
        )}
        {alerts.map((alert) => (
          <Notice key={alert.id} kind="caution" title={alert.what}>
            {alert.detail} (<When at={alert.createdAtMs} form="relative" />)
          </Notice>
        ))}
        <Sheet title="Trial balance">
          <Table caption="Balances by kind of account">
            <TableHead>
              <HeadCell>Accounts</HeadCell>
              <HeadCell align="end">How many</HeadCell>
              <HeadCell align="end">Balance</HeadCell>
            </TableHead>
            <TableBody>
              {balance.map((row) => (
                <Row key={row.kind}>
                  <RowHead>{MEANING[row.kind] ?? row.kind}</RowHead>
                  <Cell label="How many" figure>
                    {row.accounts}
                  </Cell>
                  <Cell label="Balance" figure>
                    <Money cents={row.cents} />
                  </Cell>
                </Row>
              ))}
            </TableBody>
            <TableFoot>
              <Row>
                <RowHead>Sum</RowHead>
                <Cell label="How many" figure>
                  {balance.reduce((total, row) => total + row.accounts, 0)}
                </Cell>
                <Cell label="Balance" figure>
                  <Money cents={sum} />
                </Cell>
              </Row>
            </TableFoot>
          </Table>
        </Sheet>
        <Sheet title="Latest postings">
          {postings.length === 0 ? (
            <EmptyState title="Nothing posted yet" />
          ) : (
            <Table caption="Latest postings with their entries">
              <TableHead>
                <HeadCell>Posting</HeadCell>
                <HeadCell>Entries</HeadCell>
                <HeadCell align="end">When</HeadCell>
              </TableHead>
              <TableBody>
                {postings.map((row) => (
                  <Row key={row.id}>
                    <RowHead>
                      {row.memo}
                      {row.linkedTo ? (
                        <span className="text-muted block text-sm font-normal">linked to an earlier one</span>
                      ) : null}
                    </RowHead>
                    <Cell label="Entries">
                      <ul className="grid gap-0.5">
                        {row.entries.map((entry) => (
                          <li key={entry.id} className="flex justify-between gap-6">
                            <span>{MEANING[entry.accountId.split(":")[0] ?? ""] ?? entry.accountId}</span>
                            <Money cents={entry.cents} signed />
                          </li>
                        ))}
                      </ul>
                    </Cell>
                    <Cell label="When" align="end">
                      <When at={row.postedAtMs} />
                    </Cell>
                  </Row>
                ))}
              </TableBody>
            </Table>
          )}
        </Sheet>
      </div>
    </>
  );
}
