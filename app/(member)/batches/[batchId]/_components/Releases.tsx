"use client";

import { Download } from "lucide-react";
import { useQueryClient } from "@tanstack/react-query";
import { useRouter } from "next/navigation";
import { useTransition } from "react";
import { toast } from "sonner";
import { Button, buttonLook } from "@/components/ui/Button";
import { Progress } from "@/components/ui/Progress";
import { Sheet } from "@/components/ui/Sheet";
import { When } from "@/components/ui/When";
import { buildRelease } from "../../actions";

type Release = {
  id: string;
  number: number;
  status: "building" | "ready" | "failed";
  imageCount: number | null;
  instanceCount: number | null;
  byteSize: number | null;
  sha256: string | null;
  failure: string | null;
  createdAtMs: number;
};

/** Dataset releases: ask for one, see it being built, download it. */
export function Releases({
  batchId,
  releases,
  settled,
}: {
  batchId: string;
  releases: Release[];
  settled: number;
}) {
  const router = useRouter();
  const client = useQueryClient();
  const [pending, startTransition] = useTransition();
  const isBuilding = releases.some((release) => release.status === "building");
  const build = () =>
    startTransition(async () => {
      const answer = await buildRelease(null, { batchId });
      if (!answer.ok) toast.error(answer.message);
      // The status is polled faster while something is being built.
      await client.invalidateQueries({ queryKey: ["batch-status", batchId] });
      router.refresh();
    });
  return (
    <Sheet
      title="Dataset releases"
      lead="Everything that is settled now, in open formats (COCO, Pascal VOC, GeoJSON, Web Annotation, masks), with quality report, provenance and checksums."
      actions={
        <Button kind="primary" pending={pending || isBuilding} disabled={settled === 0} onClick={build}>
          {isBuilding ? "Building" : "Build a release"}
        </Button>
      }
    >
      {releases.length === 0 ? (
        <p className="text-muted">
          {settled === 0 ? "Once a picture is settled, you can build a release." : "No release yet."}
        </p>
      ) : null}
      <ul className="divide-line divide-y">
        {releases.map((release) => (
          <li key={release.id} className="flex flex-wrap items-center justify-between gap-x-6 gap-y-2 py-3">
            <span>
              <span className="font-semibold">Release {release.number}</span>{" "}
              <span className="text-muted text-sm">
                <When at={release.createdAtMs} />
                {release.status === "ready"
                  ? ` · ${release.imageCount} pictures, ${release.instanceCount} instances, ${((release.byteSize ?? 0) / 1e6).toFixed(1)} MB`
                  : ""}
              </span>
              {release.sha256 ? (
                <span className="text-muted font-figures block text-xs wrap-anywhere">
                  SHA-256 {release.sha256}
                </span>
              ) : null}
            </span>
            {release.status === "ready" ? (
              <a className={buttonLook("quiet", "small")} href={`/api/releases/${release.id}/file`} download>
                <Download aria-hidden className="size-4" />
                Download
              </a>
            ) : null}
            {release.status === "building" ? (
              <Progress label="Building" value={null} className="w-48" />
            ) : null}
            {release.status === "failed" ? (
              <span className="text-disputed-ink text-sm">
                It could not be built: {release.failure}. Try again.
              </span>
            ) : null}
          </li>
        ))}
      </ul>
    </Sheet>
  );
}
