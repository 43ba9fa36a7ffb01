import type { Metadata } from "next";
import { PageHeader } from "@/components/ui/PageHeader";
import { EnterByLink } from "./_components/EnterByLink";

export const metadata: Metadata = { title: "Sign in by link", referrer: "no-referrer" };

type Props = { searchParams: Promise<{ secret?: string }> };

/** Where mail links lead. Signing in takes a press, because mail scanners open every link by themselves. */
export default async function LinkPage({ searchParams }: Props) {
  const { secret } = await searchParams;
  return (
    <>
      <PageHeader title="Sign in by link" lead="One press, and you are in. The link works once." />
      <EnterByLink secret={secret ?? ""} />
    </>
  );
}
