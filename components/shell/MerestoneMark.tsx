/**
 * The mark: a standing stone with the line that it settles running through its foot, one side of the ground ruled and
 * the other open. Decorative; the word stands beside it.
 */
export function MerestoneMark({ className }: { className?: string }) {
  return (
    <svg viewBox="0 0 32 32" aria-hidden className={className} fill="none">
      <path d="M10.5 25V11.2L15.2 4.5l6.3 5.2V25z" fill="var(--agreed)" />
      <path d="M15.2 4.5 17 12.2V25h4.5V9.7z" fill="var(--ink)" fillOpacity="0.28" />
      <path d="M1.5 25h29" stroke="var(--ink)" strokeWidth="2.2" />
      <path d="M22.5 30l4-5M17 30l4-5M11.5 30l4-5M28 30l2.5-3.2" stroke="var(--ink)" strokeWidth="1.4" />
      <path d="M13.2 16.2h1.6M13.2 19.4h1.6" stroke="var(--sheet)" strokeWidth="1.4" />
    </svg>
  );
}

/** Mark and name, as in the header. */
export function Wordmark() {
  return (
    <span className="inline-flex items-center gap-2">
      <MerestoneMark className="size-8" />
      <span className="font-heading text-[1.35rem] leading-none font-semibold tracking-tight max-[22rem]:sr-only">
        Merestone
      </span>
    </span>
  );
}
