import { useId, type ReactNode } from "react";
import { cn } from "./cn";
import { errorText, FieldError, type FieldText } from "./Field";

export type RadioCard = {
  value: string;
  title: ReactNode;
  text?: ReactNode;
  /** A figure or mark at the card's right edge. */
  aside?: ReactNode;
  disabled?: boolean;
};

type Props = Pick<FieldText, "label" | "hint" | "error" | "labelHidden"> & {
  name: string;
  options: readonly RadioCard[];
  defaultValue?: string;
  value?: string;
  onValueChange?: (value: string) => void;
  columns?: 1 | 2 | 3;
  className?: string;
};

const COLUMNS = { 1: "", 2: "sm:grid-cols-2", 3: "sm:grid-cols-2 lg:grid-cols-3" } as const;

/** One choice of a few where each needs a sentence. Arrow keys move the choice, as in any radio group. */
export function RadioCards({ name, options, columns = 1, className, ...rest }: Props) {
  const { label, hint, error, labelHidden, defaultValue, value, onValueChange } = rest;
  const groupId = useId();
  const message = errorText(error);
  const describedBy = [hint && `${groupId}-hint`, message && `${groupId}-error`].filter(Boolean).join(" ");
  return (
    <fieldset className={cn("grid gap-2", className)} aria-describedby={describedBy || undefined}>
      <legend className={labelHidden ? "sr-only" : "mb-1 text-[0.95rem] font-semibold"}>{label}</legend>
      {hint ? (
        <p id={`${groupId}-hint`} className="text-muted -mt-1 text-sm">
          {hint}
        </p>
      ) : null}
      <div className={cn("grid gap-2", COLUMNS[columns])}>
        {options.map((option) => (
          <label
            key={option.value}
            className={cn(
              "bg-sheet border-rule rounded-sheet flex items-start gap-3 border p-3.5 transition-colors",
              "hover:border-ink has-checked:border-agreed has-checked:bg-agreed-soft",
              "has-checked:shadow-[inset_3px_0_0_var(--agreed)] has-disabled:opacity-55",
              "has-focus-visible:outline-focus has-focus-visible:outline-2 has-focus-visible:outline-offset-2",
            )}
          >
            <input
              type="radio"
              name={name}
              value={option.value}
              disabled={option.disabled}
              {...(value === undefined
                ? { defaultChecked: option.value === defaultValue }
                : { checked: option.value === value })}
              {...(onValueChange
                ? { onChange: () => onValueChange(option.value) }
                : value === undefined
                  ? {}
                  : { readOnly: true })}
              className="accent-agreed mt-1 size-4.5 shrink-0 outline-none"
            />
            <span className="grid grow gap-0.5">
              <span className="leading-snug font-semibold">{option.title}</span>
              {option.text ? <span className="text-muted text-sm">{option.text}</span> : null}
            </span>
            {option.aside ? <span className="font-figures shrink-0 text-sm">{option.aside}</span> : null}
          </label>
        ))}
      </div>
      <FieldError id={`${groupId}-error`} message={message} />
    </fieldset>
  );
}
