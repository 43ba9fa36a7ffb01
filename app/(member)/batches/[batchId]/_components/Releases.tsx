"use client";

import { Download } from "lucide-react";
import { useQueryClient } from "@tanstack/react-query";
import { useRouter } from "next/navigation";
import { useState, useTransition } from "react";
import { toast } from "sonner";
import { Button, buttonLook } from "@/components/ui/Button";
import { Checkbox } from "@/components/ui/Checkbox";
import { Dialog } from "@/components/ui/Dialog";
import { Progress } from "@/components/ui/Progress";
import { RadioCards } from "@/components/ui/RadioCards";
import { Select } from "@/components/ui/Select";
import { Sheet } from "@/components/ui/Sheet";
import { When } from "@/components/ui/When";
import { LICENCES } from "@/lib/contracts/batches";
import { buildRelease } from "../../actions";

type Licence = (typeof LICENCES)[number];

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
  const [open, setOpen] = useState(false);
  const [withPictures, setWithPictures] = useState(false);
  const [coordinates, setCoordinates] = useState<"upright" | "stored">("upright");
  const [licence, setLicence] = useState<Licence>("");
  const build = () =>
    startTransition(async () => {
      const answer = await buildRelease(null, { batchId, withPictures, coordinates, licence });
      if (!answer.ok) {
        toast.error(answer.message);
        return;
      }
      setOpen(false);
      // The status is polled faster while something is being built.
      await client.invalidateQueries({ queryKey: ["batch-status", batchId] });
      router.refresh();
    });
  return (
    <Sheet
      title="Dataset releases"
      lead="Everything that is settled now, in open formats (COCO, Pascal VOC, GeoJSON, Web Annotation, masks), with quality report, provenance and checksums."
      actions={
        <Dialog
          title="Build a release"
          description={`Of the ${settled} ${settled === 1 ? "picture that is" : "pictures that are"} settled now. Later releases can hold more.`}
          open={open}
          onOpenChange={setOpen}
          trigger={
            <Button kind="primary" pending={isBuilding} disabled={settled === 0}>
              {isBuilding ? "Building" : "Build a release"}
            </Button>
          }
          actions={
            <Button kind="primary" pending={pending} onClick={build}>
              Build
            </Button>
          }
        >
          <div className="grid gap-5">
            <Checkbox
              label="Put the pictures in"
              hint="Upright, without camera and place data. Without them the file is small, and labels are matched by name and checksum."
              checked={withPictures}
              onChange={(event) => {
                setWithPictures(event.target.checked);
                if (event.target.checked) setCoordinates("upright");
              }}
            />
            <RadioCards
              name="coordinates"
              label="Coordinates"
              value={coordinates}
              onValueChange={(value) => setCoordinates(value === "stored" ? "stored" : "upright")}
              options={[
                {
                  value: "upright",
                  title: "Of the upright picture",
                  text: "As everybody saw it, with the EXIF orientation applied.",
                },
                {
                  value: "stored",
                  title: "Of the file as uploaded",
                  text: "For loaders that ignore the EXIF orientation. Not together with the pictures, which are upright.",
                  disabled: withPictures,
                },
              ]}
            />
            <Select
              label="Licence of the labels"
              hint="It is written into the release. Whether you may license them is for you to know."
              value={licence}
              onChange={(event) => setLicence(LICENCES.find((id) => id === event.target.value) ?? "")}
              options={LICENCES.map((id) => ({ value: id, label: id || "None stated" }))}
            />
          </div>
        </Dialog>
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
