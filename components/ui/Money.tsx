import { cn } from "./cn";
import { DEFAULT_CURRENCY, formatMoney, toAmountText } from "./amounts";

type Props = {
  /** Whole minor units of the currency. */
  cents: number;
  currency?: string;
  /** Writes + before gains, for a ledger. */
  signed?: boolean;
  className?: string;
};

/** An amount of money in tabular figures. */
export function Money({ cents, currency = DEFAULT_CURRENCY, signed = false, className }: Props) {
  return (
    <data value={toAmountText(cents, currency)} className={cn("font-figures whitespace-nowrap", className)}>
      {formatMoney(cents, { currency, signed })}
    </data>
  );
}
