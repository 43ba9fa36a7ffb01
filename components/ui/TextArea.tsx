import type { ComponentProps } from "react";
import { cn } from "./cn";
import { controlLook, Field, type FieldText } from "./Field";

type Props = FieldText & Omit<ComponentProps<"textarea">, "children">;

/** Several lines of text with their label; grows with its content where the browser can. */
export function TextArea(props: Props) {
  const { label, hint, error, optional, labelHidden, id, className, rows = 4, ...rest } = props;
  return (
    <Field {...{ label, hint, error, optional, labelHidden, id, className }}>
      {(control) => (
        <textarea
          {...rest}
          {...control}
          rows={rows}
          className={cn(controlLook, "field-sizing-content max-h-[60vh] leading-normal")}
          style={{ minHeight: `${rows * 1.5 + 1.1}rem` }}
        />
      )}
    </Field>
  );
}
