import { cn } from "./cn";

/** A place held for something that is on its way. Hidden from screen readers: wrap a group in Loading. */
export function Skeleton({ className }: { className?: string }) {
  return <span aria-hidden className={cn("bg-ink/10 block h-4 animate-pulse rounded-[2px]", className)} />;
}

type LoadingProps = { label: string; lines?: number; className?: string };

/** Lines that stand for a page or list that is on its way, announced once. */
export function Loading({ label, lines = 4, className }: LoadingProps) {
  return (
    <div role="status" className={cn("grid gap-4", className)}>
      <span className="sr-only">{label}</span>
      {Array.from({ length: lines }, (_, line) => (
        <Skeleton key={line} className={["w-full", "w-11/12", "w-4/5", "w-2/3"][line % 4] ?? "w-full"} />
      ))}
    </div>
  );
}
