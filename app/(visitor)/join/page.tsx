import type { Metadata } from "next";
import Link from "next/link";
import { PageHeader } from "@/components/ui/PageHeader";
import { JoinForm } from "./_components/JoinForm";

export const metadata: Metadata = { title: "Join" };

type Props = { searchParams: Promise<{ role?: string }> };

export default async function JoinPage({ searchParams }: Props) {
  const { role } = await searchParams;
  return (
    <>
      <PageHeader
        title="Join Merestone"
        lead="An account is free. You confirm your e-mail, and that is all."
      />
      <JoinForm role={role === "annotator" || role === "requester" ? role : null} />
      <p className="text-muted">
        You have an account?{" "}
        <Link href="/sign-in" className="link">
          Sign in
        </Link>
      </p>
    </>
  );
}
