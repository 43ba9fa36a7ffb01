import type { Metadata } from "next";
import { notFound, redirect } from "next/navigation";
import { getDb } from "@/db/client";
import { findClaim } from "@/db/queries/work";
import { requirePageActor } from "@/lib/auth/page";
import type { DeskTask } from "@/lib/contracts/desk";
import { AppError } from "@/lib/errors";
import { deskTask } from "@/lib/market/work/deskTask";
import { ClaimedDesk } from "./ClaimedDesk";

export const metadata: Metadata = { title: "Desk" };

type Props = { params: Promise<{ claimId: string }> };

/** The desk with one claimed picture. What was handed in already leads to its score. */
export default async function DeskPage({ params }: Props) {
  const actor = await requirePageActor("annotator");
  const { claimId } = await params;
  const task = taskOrLeave(() => deskTask({ actor, claimId }));
  return <ClaimedDesk task={task} batchId={findClaim(getDb(), claimId)?.batchId ?? ""} />;
}

/** The task; a claim that ended leads to the work list, one that is not there is not found. */
function taskOrLeave(read: () => DeskTask): DeskTask {
  try {
    return read();
  } catch (error) {
    if (!(error instanceof AppError)) throw error;
    if (error.code === "not_found") notFound();
    redirect("/work");
  }
}
