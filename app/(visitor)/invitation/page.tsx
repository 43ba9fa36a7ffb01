import type { Metadata } from "next";
import Link from "next/link";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { nowMs } from "@/lib/clock";
import { findInvitation } from "@/lib/market/people/team";
import { InvitationForm } from "./_components/InvitationForm";

export const metadata: Metadata = { title: "Invitation", referrer: "no-referrer" };

type Props = { searchParams: Promise<{ secret?: string }> };

export default async function InvitationPage({ searchParams }: Props) {
  const { secret = "" } = await searchParams;
  const invitation = findInvitation({ secret, nowMs: nowMs() });
  if (!invitation) {
    return (
      <>
        <PageHeader title="Invitation" />
        <Notice
          kind="danger"
          title="This invitation no longer works"
          action={<Link href="/sign-in">Sign in</Link>}
        >
          It was used, withdrawn or is too old. Ask your colleague for a new one.
        </Notice>
      </>
    );
  }
  return (
    <>
      <PageHeader
        title={`Join ${invitation.teamName}`}
        lead={`You were invited as ${invitation.role}, by the address ${invitation.email}.`}
      />
      <InvitationForm secret={secret} hasAccount={invitation.hasAccount} />
    </>
  );
}
