"use client";

import { useRouter } from "next/navigation";
import { useState } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { TextArea } from "@/components/ui/TextArea";
import { contest } from "../../../../actions";

/** Puts the picture on the docket, with a reason. */
export function ContestImage({ imageId, fileName }: { imageId: string; fileName: string }) {
  const router = useRouter();
  const [reason, setReason] = useState("");
  return (
    <ConfirmDialog
      title={`Contest ${fileName}?`}
      consequence="An admin looks at every outline and the brief, and keeps the result, picks one annotator's labels or draws it anew. Everybody concerned gets the reason. Pay is set right by the decision."
      confirmLabel="Contest it"
      trigger={<Button>Contest the result</Button>}
      onConfirm={async () => {
        const answer = await contest(null, { imageId, reason });
        if (!answer.ok) return answer.message;
        toast.success("It is on the docket.");
        router.refresh();
      }}
    >
      <TextArea
        label="What is wrong?"
        rows={4}
        maxLength={2000}
        value={reason}
        onChange={(event) => setReason(event.currentTarget.value)}
      />
    </ConfirmDialog>
  );
}
