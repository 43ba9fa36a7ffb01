import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listTeamsOf } from "@/db/queries/people";
import { PageHeader } from "@/components/ui/PageHeader";
import { requirePageActor } from "@/lib/auth/page";
import { NewBatchForm } from "./NewBatchForm";

export const metadata: Metadata = { title: "New batch" };

export default async function NewBatchPage() {
  const actor = await requirePageActor("requester");
  const teams = listTeamsOf(getDb(), actor.id).filter((team) => team.role !== "viewer");
  return (
    <div className="mx-auto max-w-lg">
      <PageHeader
        title="New batch"
        crumbs={[{ href: "/batches", label: "Batches" }]}
        lead="Name it. Everything else comes in four steps, and nothing is charged before the last."
      />
      <NewBatchForm teams={teams.map(({ id, name }) => ({ id, name }))} />
    </div>
  );
}
