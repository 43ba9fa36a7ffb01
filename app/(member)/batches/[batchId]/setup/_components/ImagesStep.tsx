"use client";

import { useQuery, useQueryClient } from "@tanstack/react-query";
import { Trash2 } from "lucide-react";
import { toast } from "sonner";
import { Uploader } from "@/components/upload/Uploader";
import { EmptyState } from "@/components/ui/EmptyState";
import { Notice } from "@/components/ui/Notice";
import { Sheet } from "@/components/ui/Sheet";
import { StateMark } from "@/components/ui/StateMark";
import type { ImageView } from "@/lib/contracts/batches";

type Props = { batchId: string; isDraft: boolean; initial: ImageView[] };

const POLL_MS = 1500;

async function fetchImages(batchId: string): Promise<ImageView[]> {
  const answer = await fetch(`/api/batches/${batchId}/images`);
  if (!answer.ok) throw new Error("The list could not be read.");
  return ((await answer.json()) as { images: ImageView[] }).images;
}

/** Step one: pictures go up, are checked one by one, and get their proposals. */
export function ImagesStep({ batchId, isDraft, initial }: Props) {
  const client = useQueryClient();
  const queryKey = ["images", batchId];
  const { data: images, isError } = useQuery({
    queryKey,
    queryFn: () => fetchImages(batchId),
    initialData: initial,
    refetchInterval: ({ state }) =>
      state.data?.some(
        (image) =>
          image.status === "checking" || image.status === "awaiting" || image.proposalState === "queued",
      )
        ? POLL_MS
        : 15_000,
  });
  const refresh = () => void client.invalidateQueries({ queryKey });
  const ready = images.filter((image) => image.status === "ready");
  const refused = images.filter((image) => image.status === "refused");
  const checking = images.length - ready.length - refused.length;
  const proposing = ready.filter((image) => image.proposalState === "queued").length;

  async function remove(image: ImageView): Promise<void> {
    const answer = await fetch(`/api/images/${image.id}`, { method: "DELETE" });
    if (answer.ok) toast.success(`${image.fileName} is out of the batch.`);
    else toast.error("That did not work, and nothing was changed.");
    refresh();
  }

  return (
    <>
      {isDraft ? (
        <Sheet title="Add pictures">
          <Uploader batchId={batchId} onSent={refresh} />
        </Sheet>
      ) : (
        <Notice>The batch is funded; its pictures are fixed.</Notice>
      )}
      {isError ? (
        <Notice kind="danger" live>
          The list of pictures could not be read. It is tried again by itself.
        </Notice>
      ) : null}
      {refused.length > 0 ? (
        <Sheet title={`Not taken: ${refused.length}`} lead="The rest of the batch goes on without them.">
          <ul className="divide-line divide-y" aria-label="Files that were not taken">
            {refused.map((image) => (
              <li key={image.id} className="flex flex-wrap items-center justify-between gap-3 py-2">
                <span className="font-semibold wrap-anywhere">{image.fileName}</span>
                <span className="text-disputed-ink grow text-sm">{image.refusal}</span>
                {isDraft ? <RemoveButton image={image} onRemove={remove} /> : null}
              </li>
            ))}
          </ul>
        </Sheet>
      ) : null}
      <Sheet
        title={`In the batch: ${ready.length}`}
        lead={
          checking > 0 || proposing > 0
            ? `${checking > 0 ? `${checking} being checked. ` : ""}${proposing > 0 ? `Looking for proposals in ${proposing}.` : ""}`
            : undefined
        }
      >
        {ready.length === 0 ? (
          <EmptyState title="No picture yet">Pictures appear here once they are up and checked.</EmptyState>
        ) : (
          <ul
            className="grid grid-cols-2 gap-4 sm:grid-cols-3 lg:grid-cols-5"
            aria-label="Pictures of the batch"
          >
            {ready.map((image) => (
              <li key={image.id} className="grid min-w-0 content-start gap-1.5">
                <img
                  src={`/api/images/${image.id}/thumb`}
                  alt=""
                  loading="lazy"
                  className="bg-sunk aspect-4/3 w-full object-cover"
                />
                <span className="flex items-start justify-between gap-1">
                  <span className="min-w-0">
                    <span className="block truncate text-sm font-semibold">{image.fileName}</span>
                    <span className="text-muted font-figures block text-xs">
                      {image.width} × {image.height}
                    </span>
                  </span>
                  {isDraft ? <RemoveButton image={image} onRemove={remove} /> : null}
                </span>
                {image.proposalState === "queued" ? (
                  <StateMark state="waits">proposals on the way</StateMark>
                ) : null}
                {image.proposalState === "failed" ? (
                  <StateMark state="disputed">no proposals</StateMark>
                ) : null}
              </li>
            ))}
          </ul>
        )}
      </Sheet>
    </>
  );
}

function RemoveButton({
  image,
  onRemove,
}: {
  image: ImageView;
  onRemove: (image: ImageView) => Promise<void>;
}) {
  return (
    <button
      type="button"
      aria-label={`Remove ${image.fileName}`}
      className="hover:bg-ink/8 rounded-sheet grid size-9 shrink-0 place-items-center"
      onClick={() => void onRemove(image)}
    >
      <Trash2 aria-hidden className="size-4" />
    </button>
  );
}
