import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listOpenInvites, listTeamMembers, listTeamsOf } from "@/db/queries/people";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { nowMs } from "@/lib/clock";
import { InviteForm, MemberRole, RevokeButton } from "./_components/TeamForms";

export const metadata: Metadata = { title: "Team" };

/** The people who share a requester's batches. */
export default async function TeamPage() {
  const actor = await requirePageActor("requester");
  const db = getDb();
  const teams = listTeamsOf(db, actor.id);
  return (
    <>
      <PageHeader
        title="Team"
        lead="Owners pay and invite, editors post and contest, viewers look and download."
      />
      <div className="grid gap-8">
        {teams.map((team) => {
          const members = listTeamMembers(db, team.id);
          const invites = listOpenInvites(db, team.id, nowMs());
          const isOwner = team.role === "owner";
          return (
            <Sheet key={team.id} title={team.name}>
              <Table caption={`Members of ${team.name}`}>
                <TableHead>
                  <HeadCell>Name</HeadCell>
                  <HeadCell>E-mail</HeadCell>
                  <HeadCell>Role</HeadCell>
                  <HeadCell align="end">Since</HeadCell>
                </TableHead>
                <TableBody>
                  {members.map((member) => (
                    <Row key={member.userId}>
                      <RowHead>
                        {member.name}
                        {member.userId === actor.id ? (
                          <span className="text-muted font-normal"> (you)</span>
                        ) : null}
                      </RowHead>
                      <Cell label="E-mail" className="wrap-anywhere">
                        {member.email}
                      </Cell>
                      <Cell label="Role">
                        {isOwner ? (
                          <MemberRole
                            teamId={team.id}
                            userId={member.userId}
                            name={member.name}
                            role={member.role}
                          />
                        ) : (
                          member.role
                        )}
                      </Cell>
                      <Cell label="Since" align="end">
                        <When at={member.joinedAtMs} form="date" />
                      </Cell>
                    </Row>
                  ))}
                </TableBody>
              </Table>
              {isOwner ? (
                <div className="mt-6 grid gap-6">
                  {invites.length > 0 ? (
                    <ul className="divide-line divide-y" aria-label="Open invitations">
                      {invites.map((invite) => (
                        <li
                          key={invite.id}
                          className="flex flex-wrap items-center justify-between gap-3 py-2"
                        >
                          <span>
                            {invite.email}, invited as {invite.role}{" "}
                            <When at={invite.createdAtMs} form="relative" />
                          </span>
                          <RevokeButton inviteId={invite.id} email={invite.email} />
                        </li>
                      ))}
                    </ul>
                  ) : null}
                  <InviteForm teamId={team.id} />
                </div>
              ) : null}
            </Sheet>
          );
        })}
      </div>
    </>
  );
}
