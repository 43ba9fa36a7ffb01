import type { ReactNode } from "react";
import { AppShell } from "@/components/shell/AppShell";
import { findActor } from "@/lib/auth/actor";
import { shellUserOf } from "@/lib/auth/shellUser";

/** Pages for people who are not signed in (yet). */
export default async function VisitorLayout({ children }: { children: ReactNode }) {
  return (
    <AppShell user={shellUserOf(await findActor())}>
      <div className="mx-auto grid max-w-lg gap-6">{children}</div>
    </AppShell>
  );
}
