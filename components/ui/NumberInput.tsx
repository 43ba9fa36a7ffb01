"use client";

import type { ComponentProps } from "react";
import { cn } from "./cn";
import { controlLook, Field, type FieldText } from "./Field";

type Props = FieldText &
  Omit<ComponentProps<"input">, "children" | "type" | "onChange"> & {
    unit?: string;
    /** The number typed, or undefined while the field is empty or not yet a number. */
    onNumberChange?: (value: number | undefined) => void;
  };

/** A number with its unit. The wheel scrolls the page and never changes the value. */
export function NumberInput(props: Props) {
  const { label, hint, error, optional, labelHidden, id, className, unit, onNumberChange, ...rest } = props;
  return (
    <Field {...{ label, hint, error, optional, labelHidden, id, className }}>
      {(control) => (
        <span className="relative block">
          <input
            inputMode={rest.step === undefined || Number.isInteger(Number(rest.step)) ? "numeric" : "decimal"}
            {...rest}
            {...control}
            type="number"
            onWheel={(event) => event.currentTarget.blur()}
            onChange={(event) => {
              const value = event.currentTarget.valueAsNumber;
              onNumberChange?.(Number.isNaN(value) ? undefined : value);
            }}
            className={cn(controlLook, "font-figures", unit && "pe-24")}
          />
          {unit ? (
            <span className="text-muted pointer-events-none absolute inset-y-0 end-3 flex items-center text-sm">
              {unit}
            </span>
          ) : null}
        </span>
      )}
    </Field>
  );
}
