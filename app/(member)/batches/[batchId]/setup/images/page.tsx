import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listImages } from "@/db/queries/batches";
import { ButtonLink } from "@/components/ui/Button";
import { orNotFound, requirePageActor } from "@/lib/auth/page";
import { ImageView } from "@/lib/contracts/batches";
import { requireBatch } from "@/lib/market/access";
import { ImagesStep } from "../_components/ImagesStep";

export const metadata: Metadata = { title: "Pictures" };

type Props = { params: Promise<{ batchId: string }> };

export default async function ImagesStepPage({ params }: Props) {
  const actor = await requirePageActor("requester");
  const { batchId } = await params;
  const batch = orNotFound(() => requireBatch(getDb(), batchId, actor, "editor"));
  const images = listImages(getDb(), batchId, { limit: 1000 }).map((image) => ImageView.parse(image));
  return (
    <div className="grid gap-6">
      <ImagesStep batchId={batchId} isDraft={batch.status === "draft"} initial={images} />
      <div className="flex justify-end">
        <ButtonLink href={`/batches/${batchId}/setup/key`} kind="primary">
          Go on to key and brief
        </ButtonLink>
      </div>
    </div>
  );
}
