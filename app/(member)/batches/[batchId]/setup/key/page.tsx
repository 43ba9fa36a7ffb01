import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { findBrief, listBriefExamples, listClasses, listImages } from "@/db/queries/batches";
import { orNotFound, requirePageActor } from "@/lib/auth/page";
import { requireBatch } from "@/lib/market/access";
import { KeyStep } from "../_components/KeyStep";

export const metadata: Metadata = { title: "Key and brief" };

type Props = { params: Promise<{ batchId: string }> };

export default async function KeyStepPage({ params }: Props) {
  const actor = await requirePageActor("requester");
  const { batchId } = await params;
  const db = getDb();
  const batch = orNotFound(() => requireBatch(db, batchId, actor, "editor"));
  const images = listImages(db, batchId, { limit: 200 })
    .filter((image) => image.status === "ready")
    .map(({ id, fileName }) => ({ id, fileName }));
  return (
    <KeyStep
      batch={{
        id: batch.id,
        title: batch.title,
        isDraft: batch.status === "draft",
        version: batch.version,
        brief: findBrief(db, batchId)?.markdown ?? "",
        sensitive: batch.sensitive,
        sensitiveNote: batch.sensitiveNote,
        safetyCritical: batch.safetyCritical,
        classes: listClasses(db, batchId).map(
          ({ id, number, name, colour, pattern, geometry, detectorLabel }) => ({
            id,
            number,
            name,
            colour,
            pattern,
            geometry,
            detectorLabel,
          }),
        ),
        examples: listBriefExamples(db, batchId).map(({ imageId, caption }) => ({ imageId, caption })),
      }}
      images={images}
    />
  );
}
