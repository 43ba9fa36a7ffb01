"use client";

import { Upload } from "lucide-react";
import { useRouter } from "next/navigation";
import { useId, useState, useTransition } from "react";
import { toast } from "sonner";
import { Button, buttonLook } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Notice } from "@/components/ui/Notice";
import { PREDICTIONS_BYTES_MAX, type PredictionImportView } from "@/lib/contracts/batches";

type Props = { batchId: string; imported: PredictionImportView | undefined; mayImport: boolean };

/** Takes a COCO results file of an own model, says what of it was used, and names the records that were not by line. */
export function ImportPredictions({ batchId, imported, mayImport }: Props) {
  const router = useRouter();
  const inputId = useId();
  const [pending, startTransition] = useTransition();
  const [problem, setProblem] = useState<string | null>(null);
  const address = `/api/batches/${batchId}/predictions`;

  function send(file: File): void {
    setProblem(null);
    startTransition(async () => {
      if (file.size > PREDICTIONS_BYTES_MAX)
        return setProblem(
          `${file.name} is over ${PREDICTIONS_BYTES_MAX / 1024 / 1024} MB. Keep the best predictions of each picture.`,
        );
      try {
        const answer = await fetch(address, {
          method: "POST",
          headers: { "content-type": "application/json" },
          body: JSON.stringify({ fileName: file.name, text: await file.text() }),
        });
        const body = (await answer.json()) as Partial<PredictionImportView> & { detail?: string };
        if (!answer.ok) return setProblem(body.detail ?? "The file was not taken.");
        toast.success(`${body.used ?? 0} predictions are taken in.`);
        router.refresh();
      } catch {
        setProblem("The file did not arrive. Check your connection and try again.");
      }
    });
  }

  async function remove(): Promise<string | undefined> {
    const answer = await fetch(address, { method: "DELETE" });
    if (!answer.ok) return "The predictions were not removed. Please try again.";
    setProblem(null);
    router.refresh();
    return undefined;
  }

  return (
    <section aria-label="Predictions of your own model" className="border-line grid gap-3 border-t pt-4">
      <h3 className="font-semibold">Predictions of your own model</h3>
      {problem ? (
        <Notice kind="danger" live>
          {problem}
        </Notice>
      ) : null}
      {imported ? (
        <Imported imported={imported} />
      ) : (
        <p className="text-muted text-sm">
          A COCO results file, its pictures matched by file_name, its category_id by the numbers of the key
          (or both by lists of images and categories in the file). Scores are calibrated on settled pictures,
          and the predictions mixed with ours in the tray of pictures that nobody has begun.
        </p>
      )}
      {mayImport ? (
        <div className="flex flex-wrap items-center gap-3">
          <input
            id={inputId}
            type="file"
            accept=".json,.jsonl,application/json"
            className="peer sr-only"
            disabled={pending}
            onChange={(event) => {
              const file = event.currentTarget.files?.[0];
              event.currentTarget.value = ""; // the same file may be mended and chosen again
              if (file) send(file);
            }}
          />
          <label
            htmlFor={inputId}
            aria-busy={pending || undefined}
            className={`${buttonLook("quiet", "small")} peer-focus-visible:outline-ink cursor-pointer peer-focus-visible:outline-2 peer-focus-visible:outline-offset-2`}
          >
            <Upload aria-hidden className="size-4" />
            {pending ? "Reading the file" : imported ? "Use another file" : "Import predictions"}
          </label>
          {imported ? (
            <ConfirmDialog
              title="Remove the imported predictions?"
              consequence={`${imported.used} predictions are forgotten. Pictures that nobody has begun get proposals without them; you can import the file again.`}
              confirmLabel="Remove"
              onConfirm={remove}
              trigger={
                <Button kind="plain" size="small">
                  Remove
                </Button>
              }
            />
          ) : null}
        </div>
      ) : null}
    </section>
  );
}

function Imported({ imported }: { imported: PredictionImportView }) {
  const { fileName, used, pictures, wrongCount, wrong } = imported;
  return (
    <div className="grid gap-2" aria-live="polite">
      <p>
        <span className="font-semibold wrap-anywhere">{fileName}</span>: {used}{" "}
        {used === 1 ? "prediction" : "predictions"} for {pictures} {pictures === 1 ? "picture" : "pictures"}.
      </p>
      {wrongCount > 0 ? (
        <details open={wrongCount <= 12}>
          <summary className="text-disputed-ink cursor-pointer">
            {wrongCount === 1 ? "1 record was" : `${wrongCount} records were`} not used
          </summary>
          <ul
            className="mt-2 grid max-h-64 gap-1 overflow-y-auto text-sm"
            aria-label="Records that were not used"
          >
            {wrong.map(({ line, reason }, index) => (
              <li key={index} className="wrap-anywhere">
                <span className="font-figures">line {line}</span>: {reason}
              </li>
            ))}
            {wrongCount > wrong.length ? <li>and {wrongCount - wrong.length} more</li> : null}
          </ul>
        </details>
      ) : null}
    </div>
  );
}
