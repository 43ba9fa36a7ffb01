import { redirect } from "next/navigation";
import type { ReactNode } from "react";
import { AppShell } from "@/components/shell/AppShell";
import { navFor } from "@/components/shell/nav";
import { findActor } from "@/lib/auth/actor";
import { shellUserOf } from "@/lib/auth/shellUser";
import { env } from "@/lib/env";

/** Pages for signed-in people. Each page checks the role again. */
export default async function MemberLayout({ children }: { children: ReactNode }) {
  const user = shellUserOf(await findActor());
  if (!user) redirect("/sign-in");
  const mailboxHref = env().MERESTONE_DEMO === "1" ? env().RESEND_BASE_URL : undefined;
  return (
    <AppShell user={user} nav={navFor(user.role, { mailboxHref })}>
      {children}
    </AppShell>
  );
}
