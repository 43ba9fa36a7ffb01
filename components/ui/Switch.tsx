import { useId, type ComponentProps, type ReactNode } from "react";
import { cn } from "./cn";

type Props = Omit<ComponentProps<"input">, "type" | "children" | "role"> & {
  label: ReactNode;
  hint?: ReactNode;
};

/** A setting that takes effect at once. Its state is also written beside it, not only shown by position. */
export function Switch({ label, hint, id, className, ...rest }: Props) {
  const generatedId = useId();
  const controlId = id ?? generatedId;
  return (
    <div className={cn("group flex items-start justify-between gap-6", className)}>
      <span className="grid gap-0.5">
        <label htmlFor={controlId} className="leading-snug font-semibold">
          {label}
        </label>
        {hint ? (
          <span id={`${controlId}-hint`} className="text-muted text-sm">
            {hint}
          </span>
        ) : null}
      </span>
      <span className="flex shrink-0 items-center gap-2 text-sm">
        <span aria-hidden className="text-muted w-6 text-end group-has-checked:hidden">
          Off
        </span>
        <span
          aria-hidden
          className="text-agreed-ink hidden w-6 text-end font-semibold group-has-checked:inline"
        >
          On
        </span>
        <input
          {...rest}
          id={controlId}
          type="checkbox"
          role="switch"
          aria-describedby={hint ? `${controlId}-hint` : undefined}
          className={cn(
            "border-rule bg-sunk relative h-7 w-12 cursor-pointer appearance-none rounded-full border transition-colors",
            "before:bg-rule before:absolute before:top-1/2 before:left-1 before:size-4.5 before:-translate-y-1/2",
            "before:rounded-[2px] before:transition-transform before:content-[''] forced-colors:before:bg-[ButtonText]",
            "checked:border-agreed checked:bg-agreed-soft checked:before:bg-agreed checked:before:translate-x-5",
            "disabled:cursor-not-allowed disabled:opacity-55",
          )}
        />
      </span>
    </div>
  );
}
