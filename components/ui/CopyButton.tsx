"use client";

import { Check, Copy } from "lucide-react";
import { useState } from "react";
import { Button } from "./Button";

type Props = { text: string; label?: string; size?: "regular" | "small" };

/** Copies a text and says whether that worked, in the button and aloud. */
export function CopyButton({ text, label = "Copy", size = "small" }: Props) {
  const [outcome, setOutcome] = useState<"copied" | "failed">();

  async function copy() {
    try {
      await navigator.clipboard.writeText(text);
      setOutcome("copied");
    } catch {
      setOutcome("failed"); // A browser may refuse the clipboard; the text is still there to select.
    }
    setTimeout(() => setOutcome(undefined), 2500);
  }

  const icon =
    outcome === "copied" ? <Check aria-hidden className="size-4" /> : <Copy aria-hidden className="size-4" />;
  return (
    <Button size={size} icon={icon} onClick={copy}>
      <span aria-live="polite">
        {outcome === "copied" ? "Copied" : outcome === "failed" ? "Select and copy by hand" : label}
      </span>
    </Button>
  );
}
