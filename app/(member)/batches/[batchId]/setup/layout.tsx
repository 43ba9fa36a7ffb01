import { notFound } from "next/navigation";
import type { ReactNode } from "react";
import { getDb } from "@/db/client";
import { PageHeader } from "@/components/ui/PageHeader";
import { orNotFound, requirePageActor } from "@/lib/auth/page";
import { requireBatch } from "@/lib/market/access";
import { SetupSteps } from "./_components/SetupSteps";

type Props = { params: Promise<{ batchId: string }>; children: ReactNode };

export default async function SetupLayout({ params, children }: Props) {
  const actor = await requirePageActor("requester");
  const { batchId } = await params;
  const batch = orNotFound(() => requireBatch(getDb(), batchId, actor, "editor"));
  if (batch.status === "closed") notFound();
  return (
    <>
      <PageHeader title={batch.title} crumbs={[{ href: "/batches", label: "Batches" }]} />
      <SetupSteps batchId={batchId} />
      {children}
    </>
  );
}
