import { useId, type ComponentProps } from "react";
import { cn } from "./cn";
import { errorText, FieldError, type FieldText } from "./Field";

type Props = Pick<FieldText, "label" | "hint" | "error"> & Omit<ComponentProps<"input">, "type" | "children">;

/** One yes or no that is sent with its form. */
export function Checkbox({ label, hint, error, id, className, ...rest }: Props) {
  const generatedId = useId();
  const controlId = id ?? generatedId;
  const message = errorText(error);
  const describedBy = [hint && `${controlId}-hint`, message && `${controlId}-error`]
    .filter(Boolean)
    .join(" ");
  return (
    <div className={cn("grid gap-1", className)}>
      <div className="flex items-start gap-3">
        <input
          {...rest}
          type="checkbox"
          id={controlId}
          aria-describedby={describedBy || undefined}
          aria-invalid={message ? true : undefined}
          className="accent-agreed mt-0.5 size-5 shrink-0"
        />
        <span className="grid gap-0.5">
          <label htmlFor={controlId} className="leading-snug">
            {label}
          </label>
          {hint ? (
            <span id={`${controlId}-hint`} className="text-muted text-sm">
              {hint}
            </span>
          ) : null}
        </span>
      </div>
      <FieldError id={`${controlId}-error`} message={message} />
    </div>
  );
}
