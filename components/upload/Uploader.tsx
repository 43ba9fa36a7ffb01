"use client";

import { ImagePlus, Pause, Play, RotateCcw, X } from "lucide-react";
import { useEffect, useState, useSyncExternalStore } from "react";
import { useDropzone } from "react-dropzone";
import { Button } from "@/components/ui/Button";
import { cn } from "@/components/ui/cn";
import { Notice } from "@/components/ui/Notice";
import { Progress } from "@/components/ui/Progress";
import { FILES_PER_DROP_MAX } from "@/lib/contracts/batches";
import { UploadQueue, type UploadItem, type UploadState } from "./uploadQueue";

type Props = { batchId: string; onSent: () => void };

const NO_ITEMS: readonly UploadItem[] = [];

const WORD: Record<UploadState, string> = {
  reading: "reading",
  waiting: "waiting",
  sending: "uploading",
  paused: "paused",
  sent: "uploaded",
  failed: "failed",
  duplicate: "duplicate, not uploaded",
  refused: "not taken",
};

/** Files that are listed one by one; of longer queues the finished ones are summed up. */
const LISTED_MAX = 60;

/** Drop or choose pictures; each goes straight to the object store, with its progress and its own fate. */
export function Uploader({ batchId, onSent }: Props) {
  const [queue] = useState(() => new UploadQueue(batchId, onSent));
  const items = useSyncExternalStore(queue.subscribe, queue.getItems, () => NO_ITEMS);
  const [restored, setRestored] = useState(0);
  const [tooMany, setTooMany] = useState(0);
  useEffect(() => {
    void queue.restore().then(setRestored);
  }, [queue]);
  const { getRootProps, getInputProps, isDragActive, open } = useDropzone({
    noClick: true,
    noKeyboard: true,
    onDrop: (accepted, rejected) => {
      const files = [...accepted, ...rejected.map((rejection) => rejection.file)];
      setTooMany(Math.max(0, files.length - FILES_PER_DROP_MAX));
      queue.add(files.slice(0, FILES_PER_DROP_MAX));
    },
  });
  const count = (...states: UploadState[]) => items.filter((item) => states.includes(item.state)).length;
  const isActive = count("reading", "waiting", "sending") > 0;
  const isPaused = count("paused") > 0;
  useLeaveGuard(isActive);
  const total = items.reduce(
    (sum, item) => sum + (item.state === "refused" || item.state === "duplicate" ? 0 : item.byteSize),
    0,
  );
  const sent = items.reduce(
    (sum, item) => sum + (item.state === "refused" || item.state === "duplicate" ? 0 : item.sentBytes),
    0,
  );
  const problems = items.filter((item) => ["failed", "refused", "duplicate"].includes(item.state));
  const others = items.filter((item) => !["failed", "refused", "duplicate", "sent"].includes(item.state));
  return (
    <div className="grid gap-4">
      <div
        {...getRootProps()}
        className={cn(
          "rounded-sheet grid justify-items-center gap-3 border-2 border-dashed px-6 py-10 text-center",
          isDragActive ? "border-agreed bg-agreed-soft" : "border-rule",
        )}
      >
        <input {...getInputProps()} aria-label="Choose pictures" />
        <ImagePlus aria-hidden className="text-muted size-9" />
        <p className="text-lg font-semibold">{isDragActive ? "Let go to add them" : "Drop pictures here"}</p>
        <Button kind="primary" onClick={open}>
          Choose files
        </Button>
        <p className="text-muted max-w-prose text-sm">
          JPEG, PNG, WebP, AVIF or TIFF, up to 50 MB and 50 megapixels each, {FILES_PER_DROP_MAX} at a time.
          Place and camera data are removed from every stored copy.
        </p>
      </div>
      {tooMany > 0 ? (
        <Notice kind="caution" live>
          {FILES_PER_DROP_MAX} files at a time: the last {tooMany} were left out. Drop them again once these
          are up.
        </Notice>
      ) : null}
      {restored > 0 && isActive ? (
        <Notice live>
          Going on with {restored} {restored === 1 ? "file" : "files"} from your last visit.
        </Notice>
      ) : null}
      {items.length > 0 ? (
        <div className="grid gap-3">
          <Progress
            label="Upload"
            value={total === 0 ? 1 : sent / total}
            state={isPaused ? "waits" : "agreed"}
            detail={`${count("sent")} of ${items.length - count("refused", "duplicate")} up${problems.length > 0 ? `, ${problems.length} not` : ""}`}
          />
          <div className="flex flex-wrap gap-2">
            {isActive ? (
              <Button
                size="small"
                icon={<Pause aria-hidden className="size-4" />}
                onClick={() => queue.pause()}
              >
                Pause
              </Button>
            ) : null}
            {isPaused ? (
              <Button
                size="small"
                icon={<Play aria-hidden className="size-4" />}
                onClick={() => queue.resume()}
              >
                Go on
              </Button>
            ) : null}
            {count("failed") > 0 ? (
              <Button
                size="small"
                icon={<RotateCcw aria-hidden className="size-4" />}
                onClick={() => queue.retry()}
              >
                Try the {count("failed")} failed again
              </Button>
            ) : null}
            {count("sent", "duplicate", "refused") > 0 ? (
              <Button size="small" kind="plain" onClick={() => queue.clearFinished()}>
                Clear the list
              </Button>
            ) : null}
          </div>
          <ul className="divide-line max-h-96 divide-y overflow-y-auto" aria-label="Files">
            {[...problems, ...others].slice(0, LISTED_MAX).map((item) => (
              <UploadRow key={item.key} item={item} queue={queue} />
            ))}
          </ul>
        </div>
      ) : null}
    </div>
  );
}

function UploadRow({ item, queue }: { item: UploadItem; queue: UploadQueue }) {
  const isBad = item.state === "failed" || item.state === "refused";
  return (
    <li className="flex flex-wrap items-center gap-x-4 gap-y-1 py-2 text-sm">
      <span className="min-w-0 grow basis-48 truncate font-semibold">{item.name}</span>
      {item.state === "sending" ? (
        <Progress
          label={`Upload of ${item.name}`}
          labelHidden
          value={item.sentBytes / item.byteSize}
          className="w-40"
        />
      ) : null}
      <span className={cn(isBad ? "text-disputed-ink" : "text-muted", "basis-auto")}>
        {WORD[item.state]}
        {item.reason ? `: ${item.reason}` : ""}
      </span>
      {item.state === "failed" ? (
        <Button size="small" onClick={() => queue.retry(item.key)}>
          Try again
        </Button>
      ) : null}
      <button
        type="button"
        aria-label={`Take ${item.name} off the list`}
        className="hover:bg-ink/8 rounded-sheet grid size-8 place-items-center"
        onClick={() => queue.drop(item.key)}
      >
        <X aria-hidden className="size-4" />
      </button>
    </li>
  );
}

/** Warns before the page is left while files are under way. */
function useLeaveGuard(active: boolean): void {
  useEffect(() => {
    if (!active) return;
    const warn = (event: BeforeUnloadEvent) => event.preventDefault();
    window.addEventListener("beforeunload", warn);
    return () => window.removeEventListener("beforeunload", warn);
  }, [active]);
}
