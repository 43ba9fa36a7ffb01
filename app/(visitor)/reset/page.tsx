import type { Metadata } from "next";
import { PageHeader } from "@/components/ui/PageHeader";
import { ResetForm } from "./_components/ResetForm";

export const metadata: Metadata = { title: "New password", referrer: "no-referrer" };

type Props = { searchParams: Promise<{ secret?: string }> };

export default async function ResetPage({ searchParams }: Props) {
  const { secret } = await searchParams;
  return (
    <>
      <PageHeader title="New password" lead="All your other sessions end." />
      <ResetForm secret={secret ?? ""} />
    </>
  );
}
