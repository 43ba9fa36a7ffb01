"use client";

import { AlertDialog as Base } from "@base-ui/react/alert-dialog";
import { useState, type ReactElement, type ReactNode } from "react";
import { Button } from "./Button";
import { cn } from "./cn";
import { backdropLook, popupLook } from "./Dialog";
import { Notice } from "./Notice";
import { TextInput } from "./TextInput";

type Props = {
  title: ReactNode;
  /** What will have happened afterwards, in figures where there are any, and whether it can be undone. */
  consequence: ReactNode;
  confirmLabel: string;
  cancelLabel?: string;
  kind?: "ordinary" | "danger";
  /** When set, the button stays off until exactly this has been typed. For what cannot be taken back. */
  typed?: string;
  trigger?: ReactElement<Record<string, unknown>>;
  open?: boolean;
  onOpenChange?: (open: boolean) => void;
  /** May return a sentence that says what went wrong; the dialog then stays open and shows it. */
  onConfirm: () => Promise<string | void> | string | void;
  children?: ReactNode;
};

const UNKNOWN_FAILURE = "That did not work, and nothing was changed. Please try again.";

/** Asks before something with a consequence, and states the consequence. Focus starts on the safe answer. */
export function ConfirmDialog({ title, consequence, confirmLabel, trigger, onConfirm, ...rest }: Props) {
  const { cancelLabel = "Go back", kind = "ordinary", typed, open, onOpenChange, children } = rest;
  const [innerOpen, setInnerOpen] = useState(false);
  const [typedText, setTypedText] = useState("");
  const [pending, setPending] = useState(false);
  const [failure, setFailure] = useState<string>();
  const isOpen = open ?? innerOpen;
  const isReady = typed === undefined || typedText.trim() === typed;

  function changeOpen(next: boolean) {
    if (pending) return;
    setInnerOpen(next);
    onOpenChange?.(next);
    setTypedText("");
    setFailure(undefined);
  }

  async function confirm() {
    setPending(true);
    setFailure(undefined);
    let problem: string | void;
    try {
      problem = await onConfirm();
    } catch (error) {
      // redirect() and notFound() travel as errors with a digest and must reach the framework.
      if (typeof error === "object" && error !== null && "digest" in error) throw error;
      problem = UNKNOWN_FAILURE;
    } finally {
      setPending(false);
    }
    if (problem) return setFailure(problem);
    setInnerOpen(false);
    onOpenChange?.(false);
    setTypedText("");
  }

  return (
    <Base.Root open={isOpen} onOpenChange={(next: boolean) => changeOpen(next)}>
      {trigger ? <Base.Trigger render={trigger} /> : null}
      <Base.Portal>
        <Base.Backdrop className={backdropLook} />
        <Base.Popup className={cn(popupLook, "sm:max-w-lg")}>
          <Base.Title className="font-heading text-xl font-semibold">{title}</Base.Title>
          <Base.Description render={<div />} className="mt-2">
            {consequence}
          </Base.Description>
          {children ? <div className="mt-4">{children}</div> : null}
          {typed === undefined ? null : (
            <TextInput
              className="mt-4"
              label={
                <>
                  Type <span className="font-figures bg-sunk px-1">{typed}</span> to go on
                </>
              }
              autoComplete="off"
              spellCheck={false}
              value={typedText}
              onChange={(event) => setTypedText(event.currentTarget.value)}
            />
          )}
          {failure ? (
            <Notice kind="danger" className="mt-4" live>
              {failure}
            </Notice>
          ) : null}
          <div className="mt-6 flex flex-col-reverse gap-2 sm:flex-row sm:justify-end">
            <Base.Close render={<Button>{cancelLabel}</Button>} />
            <Button
              kind={kind === "danger" ? "danger" : "primary"}
              pending={pending}
              disabled={!isReady}
              onClick={confirm}
            >
              {confirmLabel}
            </Button>
          </div>
        </Base.Popup>
      </Base.Portal>
    </Base.Root>
  );
}
