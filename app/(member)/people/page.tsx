import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listPeople } from "@/db/queries/people";
import { Button } from "@/components/ui/Button";
import { EmptyState } from "@/components/ui/EmptyState";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { StateMark } from "@/components/ui/StateMark";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { TextInput } from "@/components/ui/TextInput";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { SuspendButton } from "./_components/SuspendButton";

export const metadata: Metadata = { title: "People" };

type Props = { searchParams: Promise<{ search?: string }> };

/** Accounts, with search and suspension. */
export default async function PeoplePage({ searchParams }: Props) {
  const actor = await requirePageActor("admin");
  const { search = "" } = await searchParams;
  const rows = listPeople(getDb(), { limit: 200, search });
  return (
    <>
      <PageHeader title="People" />
      <form className="mb-6 flex max-w-lg items-end gap-3" role="search">
        <TextInput label="Name or e-mail" name="search" defaultValue={search} className="grow" />
        <Button type="submit">Search</Button>
      </form>
      {rows.length === 0 ? (
        <EmptyState title="Nobody fits" />
      ) : (
        <Sheet>
          <Table caption="Accounts">
            <TableHead>
              <HeadCell>Name</HeadCell>
              <HeadCell>E-mail</HeadCell>
              <HeadCell>Role</HeadCell>
              <HeadCell>State</HeadCell>
              <HeadCell align="end">Since</HeadCell>
              <HeadCell align="end">Action</HeadCell>
            </TableHead>
            <TableBody>
              {rows.map((person) => (
                <Row key={person.id}>
                  <RowHead>{person.name}</RowHead>
                  <Cell label="E-mail" className="wrap-anywhere">
                    {person.email}
                  </Cell>
                  <Cell label="Role">{person.role}</Cell>
                  <Cell label="State">
                    {person.status === "suspended" ? (
                      <StateMark state="disputed">suspended</StateMark>
                    ) : person.emailVerifiedAtMs === null ? (
                      <StateMark state="waits">unconfirmed</StateMark>
                    ) : (
                      <StateMark state="agreed">active</StateMark>
                    )}
                  </Cell>
                  <Cell label="Since" align="end">
                    <When at={person.createdAtMs} form="date" />
                  </Cell>
                  <Cell label="Action" align="end">
                    {person.id === actor.id ? (
                      "–"
                    ) : (
                      <SuspendButton
                        userId={person.id}
                        name={person.name}
                        isSuspended={person.status === "suspended"}
                      />
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
