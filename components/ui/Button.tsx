import Link from "next/link";
import type { ComponentProps, ReactNode } from "react";
import { cn } from "./cn";

export type ButtonKind = "primary" | "quiet" | "plain" | "danger";
export type ButtonSize = "regular" | "small";

type Look = { kind?: ButtonKind; size?: ButtonSize; icon?: ReactNode };

const KIND: Record<ButtonKind, string> = {
  primary: "bg-ink text-sheet border-ink hover:bg-ink/88",
  quiet: "bg-sheet text-ink border-rule hover:border-ink hover:bg-paper",
  plain: "bg-transparent text-ink border-transparent hover:bg-ink/8",
  danger: "bg-disputed-ink text-sheet border-disputed-ink hover:bg-disputed-ink/88",
};

const SIZE: Record<ButtonSize, string> = {
  regular: "min-h-11 px-4 py-2 text-base",
  small: "min-h-9 px-3 py-1 text-sm",
};

/** The class names of a button, for elements that cannot be one (a file label, a summary). */
export function buttonLook(kind: ButtonKind = "quiet", size: ButtonSize = "regular"): string {
  return cn(
    "inline-flex items-center justify-center gap-2 rounded-sheet border font-semibold select-none",
    "transition-colors duration-150 no-underline text-center leading-tight",
    "disabled:opacity-55 aria-disabled:opacity-55",
    KIND[kind],
    SIZE[size],
  );
}

type ButtonProps = Omit<ComponentProps<"button">, "type"> &
  Look & {
    type?: "button" | "submit" | "reset";
    /** While true the button keeps focus, says that it is busy and does nothing. */
    pending?: boolean;
  };

/** A button. `primary` is the one next step of a screen; `danger` destroys or pays. */
export function Button({
  kind,
  size,
  icon,
  pending = false,
  type = "button",
  className,
  children,
  onClick,
  ...rest
}: ButtonProps) {
  return (
    <button
      {...rest}
      // A pending button stays focusable, so it is switched off by its type and not by `disabled`.
      type={pending ? "button" : type}
      onClick={pending ? undefined : onClick}
      aria-disabled={pending || rest["aria-disabled"] || undefined}
      aria-busy={pending || undefined}
      className={cn(buttonLook(kind, size), pending && "cursor-progress", className)}
    >
      {pending ? <Spinner /> : icon}
      {children}
    </button>
  );
}

type ButtonLinkProps = ComponentProps<typeof Link> & Look;

/** A link that looks like a button: it goes somewhere and changes nothing. */
export function ButtonLink({ kind, size, icon, className, children, ...rest }: ButtonLinkProps) {
  return (
    <Link {...rest} className={cn(buttonLook(kind, size), className)}>
      {icon}
      {children}
    </Link>
  );
}

/** A small turning mark; decorative, so whatever holds it says in words what is going on. */
export function Spinner({ className }: { className?: string }) {
  return (
    <svg viewBox="0 0 16 16" aria-hidden className={cn("size-4 animate-spin", className)}>
      <circle cx="8" cy="8" r="6.5" fill="none" stroke="currentColor" strokeOpacity="0.3" strokeWidth="2" />
      <path d="M8 1.5A6.5 6.5 0 0 1 14.5 8" fill="none" stroke="currentColor" strokeWidth="2" />
    </svg>
  );
}
