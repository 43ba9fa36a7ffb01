import type { ComponentProps, ReactNode } from "react";
import { cn } from "./cn";
import { controlLook, Field, type FieldText } from "./Field";

type Props = FieldText & Omit<ComponentProps<"input">, "children"> & { suffix?: ReactNode };

/** One line of text with its label. Takes every attribute of `<input>`. */
export function TextInput(props: Props) {
  const { label, hint, error, optional, labelHidden, id, className, suffix, ...rest } = props;
  return (
    <Field {...{ label, hint, error, optional, labelHidden, id, className }}>
      {(control) => (
        <span className="relative block">
          <input
            type="text"
            {...rest}
            {...control}
            required={rest.required}
            className={cn(controlLook, Boolean(suffix) && "pe-20")}
          />
          {suffix ? (
            <span className="text-muted pointer-events-none absolute inset-y-0 end-3 flex items-center text-sm">
              {suffix}
            </span>
          ) : null}
        </span>
      )}
    </Field>
  );
}
