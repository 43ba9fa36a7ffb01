import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { countReadyImages, listClasses } from "@/db/queries/batches";
import { orNotFound, requirePageActor } from "@/lib/auth/page";
import { requireBatch } from "@/lib/market/access";
import { PayStep } from "../_components/PayStep";

export const metadata: Metadata = { title: "Quality and pay" };

type Props = { params: Promise<{ batchId: string }> };

export default async function PayStepPage({ params }: Props) {
  const actor = await requirePageActor("requester");
  const { batchId } = await params;
  const db = getDb();
  const batch = orNotFound(() => requireBatch(db, batchId, actor, "editor"));
  const key = listClasses(db, batchId);
  const {
    kMin,
    kMax,
    agreementTarget,
    baseCents,
    boxCents,
    polygonCents,
    capCents,
    expectedInstances,
    floorHourlyCents,
  } = batch;
  return (
    <PayStep
      batch={{
        id: batch.id,
        version: batch.version,
        isDraft: batch.status === "draft",
        feeBps: batch.feeBps,
      }}
      initial={{
        kMin,
        kMax,
        agreementTarget,
        baseCents,
        boxCents,
        polygonCents,
        capCents,
        expectedInstances,
        floorHourlyCents,
      }}
      imageCount={countReadyImages(db, batchId)}
      polygonShare={
        key.length === 0 ? 1 : key.filter((row) => row.geometry === "polygon").length / key.length
      }
    />
  );
}
