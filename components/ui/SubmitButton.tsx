"use client";

import type { ComponentProps } from "react";
import { useFormStatus } from "react-dom";
import { Button } from "./Button";

type Props = Omit<ComponentProps<typeof Button>, "type" | "pending"> & {
  /** Read out and shown while the form is on its way; the label stays if absent. */
  pendingLabel?: string;
};

/** The submit button of a form with an action; pending while the action runs. */
export function SubmitButton({ pendingLabel, children, kind = "primary", ...rest }: Props) {
  const { pending } = useFormStatus();
  return (
    <Button {...rest} kind={kind} type="submit" pending={pending}>
      {pending && pendingLabel ? pendingLabel : children}
    </Button>
  );
}
