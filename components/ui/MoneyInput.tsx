"use client";

import { useState, type ComponentProps } from "react";
import { cn } from "./cn";
import { controlLook, errorText, Field, type FieldText } from "./Field";
import { DEFAULT_CURRENCY, formatMoney, parseAmount, toAmountText } from "./amounts";

type Props = FieldText &
  Pick<ComponentProps<"input">, "id" | "className" | "disabled" | "required" | "autoFocus"> & {
    /** Name under which whole cents go into the form. */
    name?: string;
    defaultCents?: number;
    minCents?: number;
    maxCents?: number;
    currency?: string;
    /** Whole cents, or undefined while what is typed is not an amount within the limits. */
    onCentsChange?: (cents: number | undefined) => void;
  };

/** An amount of money, typed with a point and carried as whole cents. Says what is wrong once left. */
export function MoneyInput(props: Props) {
  const { label, hint, error, optional, labelHidden, id, className, name, onCentsChange, ...rest } = props;
  const { defaultCents, minCents, maxCents, currency = DEFAULT_CURRENCY, ...attributes } = rest;
  const [text, setText] = useState(defaultCents === undefined ? "" : toAmountText(defaultCents, currency));
  const [left, setLeft] = useState(false);
  const cents = parseAmount(text, currency);
  const problem = text === "" ? undefined : amountProblem(cents, { minCents, maxCents, currency });
  return (
    <Field
      {...{ label, hint, optional, labelHidden, id, className }}
      error={(left && problem) || errorText(error)}
    >
      {(control) => (
        <span className="relative block">
          <input
            {...attributes}
            {...control}
            inputMode="decimal"
            autoComplete="off"
            value={text}
            onChange={(event) => {
              const next = event.currentTarget.value;
              const nextCents = parseAmount(next, currency);
              setText(next);
              onCentsChange?.(
                amountProblem(nextCents, { minCents, maxCents, currency }) ? undefined : nextCents,
              );
            }}
            onBlur={() => {
              setLeft(true);
              if (cents !== undefined) setText(toAmountText(cents, currency));
            }}
            className={cn(controlLook, "font-figures pe-16 text-end")}
          />
          <span className="text-muted pointer-events-none absolute inset-y-0 end-3 flex items-center text-sm">
            {currency}
          </span>
          {name ? <input type="hidden" name={name} value={problem ? "" : (cents ?? "")} /> : null}
        </span>
      )}
    </Field>
  );
}

type Limits = { minCents: number | undefined; maxCents: number | undefined; currency: string };

function amountProblem(cents: number | undefined, { minCents, maxCents, currency }: Limits) {
  if (cents === undefined) return `Write an amount such as ${toAmountText(1250, currency)}.`;
  if (minCents !== undefined && cents < minCents)
    return `The least possible is ${formatMoney(minCents, { currency })}.`;
  if (maxCents !== undefined && cents > maxCents)
    return `The most possible is ${formatMoney(maxCents, { currency })}.`;
  return undefined;
}
