import type { Metadata } from "next";
import Link from "next/link";
import { redirect } from "next/navigation";
import { homeOf } from "@/components/shell/nav";
import { PageHeader } from "@/components/ui/PageHeader";
import { findActor } from "@/lib/auth/actor";
import { shellUserOf } from "@/lib/auth/shellUser";
import { env } from "@/lib/env";
import { SignInForms } from "./_components/SignInForms";

export const metadata: Metadata = { title: "Sign in" };

type Props = { searchParams: Promise<{ callbackUrl?: string }> };

export default async function SignInPage({ searchParams }: Props) {
  const user = shellUserOf(await findActor());
  if (user) redirect(homeOf(user.role));
  const { callbackUrl } = await searchParams;
  return (
    <>
      <PageHeader title="Sign in" />
      <SignInForms next={localPath(callbackUrl)} isDemo={env().MERESTONE_DEMO === "1"} />
      <p className="text-muted">
        No account yet?{" "}
        <Link href="/join" className="link">
          Join Merestone
        </Link>
      </p>
    </>
  );
}

/** Where to go afterwards: only a path of our own. */
function localPath(given: string | undefined): string | null {
  if (!given) return null;
  const path = given.startsWith(env().APP_URL) ? given.slice(env().APP_URL.length) : given;
  return /^\/(?![/\\])/.test(path) ? path : null;
}
