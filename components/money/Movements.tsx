import { Money } from "@/components/ui/Money";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";

export type MovementRow = {
  entryId: number;
  memo: string;
  cents: number;
  balanceCents: number;
  postedAtMs: number;
};

/** Entries of one account with the balance after each, latest first. */
export function Movements({
  caption,
  rows,
  empty,
}: {
  caption: string;
  rows: readonly MovementRow[];
  empty: string;
}) {
  if (rows.length === 0) return <p className="text-muted mt-6">{empty}</p>;
  return (
    <div className="mt-6">
      <Table caption={caption}>
        <TableHead>
          <HeadCell>What</HeadCell>
          <HeadCell align="end">When</HeadCell>
          <HeadCell align="end">Amount</HeadCell>
          <HeadCell align="end">Balance</HeadCell>
        </TableHead>
        <TableBody>
          {rows.map((row) => (
            <Row key={row.entryId}>
              <RowHead className="font-normal">{row.memo}</RowHead>
              <Cell label="When" align="end">
                <When at={row.postedAtMs} />
              </Cell>
              <Cell label="Amount" figure>
                <Money cents={row.cents} signed />
              </Cell>
              <Cell label="Balance" figure>
                <Money cents={row.balanceCents} />
              </Cell>
            </Row>
          ))}
        </TableBody>
      </Table>
    </div>
  );
}
