import type { Metadata } from "next";
import { notFound, redirect } from "next/navigation";
import { getDb } from "@/db/client";
import { findClaim } from "@/db/queries/work";
import { requirePageActor } from "@/lib/auth/page";
import { AppError } from "@/lib/errors";
import { deskTask } from "@/lib/market/work/deskTask";
import { ClaimedDesk } from "./ClaimedDesk";

export const metadata: Metadata = { title: "Desk" };

type Props = { params: Promise<{ claimId: string }> };

/** The desk with one claimed picture. What was handed in already leads to its score. */
export default async function DeskPage({ params }: Props) {
  const actor = await requirePageActor("annotator");
  const { claimId } = await params;
  try {
    return (
      <ClaimedDesk task={deskTask({ actor, claimId })} batchId={findClaim(getDb(), claimId)?.batchId ?? ""} />
    );
  } catch (error) {
    if (!(error instanceof AppError)) throw error;
    if (error.code === "not_found") notFound();
    redirect("/work");
  }
}
