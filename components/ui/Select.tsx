import { ChevronDown } from "lucide-react";
import type { ComponentProps } from "react";
import { cn } from "./cn";
import { controlLook, Field, type FieldText } from "./Field";

export type SelectOption = { value: string; label: string; disabled?: boolean };

type Props = FieldText &
  Omit<ComponentProps<"select">, "children"> & {
    options: readonly SelectOption[];
    /** Shown first and not selectable, for a choice that has no default. */
    placeholder?: string;
  };

/** One choice from a list, by the platform's own control: it is right on every phone and screen reader. */
export function Select(props: Props) {
  const { label, hint, error, optional, labelHidden, id, className, options, placeholder, ...rest } = props;
  const uncontrolled = rest.value === undefined && rest.defaultValue === undefined;
  return (
    <Field {...{ label, hint, error, optional, labelHidden, id, className }}>
      {(control) => (
        <span className="relative block">
          <select
            {...(placeholder && uncontrolled ? { defaultValue: "" } : {})}
            {...rest}
            {...control}
            className={cn(controlLook, "appearance-none pe-10")}
          >
            {placeholder ? (
              <option value="" disabled>
                {placeholder}
              </option>
            ) : null}
            {options.map((option) => (
              <option key={option.value} value={option.value} disabled={option.disabled}>
                {option.label}
              </option>
            ))}
          </select>
          <ChevronDown
            aria-hidden
            className="text-muted pointer-events-none absolute end-3 top-1/2 size-4 -translate-y-1/2"
          />
        </span>
      )}
    </Field>
  );
}
