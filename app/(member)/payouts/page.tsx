import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listPayouts } from "@/db/queries/payments";
import { PayoutMark } from "@/components/money/PayoutMark";
import { EmptyState } from "@/components/ui/EmptyState";
import { Money } from "@/components/ui/Money";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";

export const metadata: Metadata = { title: "Payouts" };

export default async function PayoutsPage() {
  await requirePageActor("admin");
  const rows = listPayouts(getDb(), 200);
  return (
    <>
      <PageHeader
        title="Payouts"
        lead="Each is one transfer, ever. One that comes back is booked back to the annotator."
      />
      {rows.length === 0 ? (
        <EmptyState title="No payout yet" />
      ) : (
        <Sheet>
          <Table caption="Payouts, latest first">
            <TableHead>
              <HeadCell>Annotator</HeadCell>
              <HeadCell>State</HeadCell>
              <HeadCell align="end">Amount</HeadCell>
              <HeadCell align="end">Asked for</HeadCell>
            </TableHead>
            <TableBody>
              {rows.map(({ payout, name }) => (
                <Row key={payout.id}>
                  <RowHead>{name}</RowHead>
                  <Cell label="State">
                    <PayoutMark status={payout.status} />
                    {payout.failure ? (
                      <span className="text-muted block text-sm">{payout.failure}</span>
                    ) : null}
                  </Cell>
                  <Cell label="Amount" figure>
                    <Money cents={payout.amountCents} />
                  </Cell>
                  <Cell label="Asked for" align="end">
                    <When at={payout.createdAtMs} />
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
