import { CircleAlert } from "lucide-react";
import { useId, type ReactNode } from "react";
import { cn } from "./cn";

export type FieldText = {
  label: ReactNode;
  hint?: ReactNode | undefined;
  /** What is wrong and how to put it right; absent or empty when nothing is. */
  error?: string | readonly string[] | undefined;
  optional?: boolean | undefined;
  labelHidden?: boolean | undefined;
};

export type ControlAttributes = {
  id: string;
  "aria-describedby"?: string;
  "aria-invalid"?: true;
};

type Props = FieldText & {
  id?: string | undefined;
  className?: string | undefined;
  children: (control: ControlAttributes) => ReactNode;
};

/** Label, hint and error around one control, tied together for assistive technology. */
export function Field({ label, hint, error, optional, labelHidden, id, className, children }: Props) {
  const generatedId = useId();
  const controlId = id ?? generatedId;
  const message = errorText(error);
  const describedBy = [hint && `${controlId}-hint`, message && `${controlId}-error`]
    .filter(Boolean)
    .join(" ");
  return (
    <div className={cn("grid content-start gap-1.5", className)}>
      <label htmlFor={controlId} className={labelHidden ? "sr-only" : "text-[0.95rem] font-semibold"}>
        {label}
        {optional ? <span className="text-muted font-normal"> (optional)</span> : null}
      </label>
      {hint ? (
        <p id={`${controlId}-hint`} className="text-muted -mt-1 text-sm">
          {hint}
        </p>
      ) : null}
      {children({
        id: controlId,
        ...(describedBy ? { "aria-describedby": describedBy } : {}),
        ...(message ? { "aria-invalid": true } : {}),
      })}
      <FieldError id={`${controlId}-error`} message={message} />
    </div>
  );
}

/** The line under a control that says what is wrong with it. */
export function FieldError({ id, message }: { id: string; message: string | undefined }) {
  if (!message) return null;
  return (
    <p id={id} className="text-disputed-ink flex items-start gap-1.5 text-sm font-medium">
      <CircleAlert aria-hidden className="mt-0.5 size-4 shrink-0" />
      <span>{message}</span>
    </p>
  );
}

export function errorText(error: FieldText["error"]): string | undefined {
  const text = typeof error === "string" ? error : error?.join(" ");
  return text || undefined;
}

/** The common look of text-like controls. */
export const controlLook = cn(
  "bg-sheet text-ink border-rule w-full min-w-0 rounded-sheet border px-3 py-2 min-h-11 text-base",
  "placeholder:text-muted placeholder:opacity-100 hover:border-ink",
  "aria-invalid:border-disputed aria-invalid:border-2",
  "disabled:bg-sunk disabled:text-muted [&[readonly]]:bg-sunk",
);
