import { Loading, Skeleton } from "@/components/ui/Skeleton";

/**
 * What a `loading.tsx` shows. There is none at the root on purpose: a page behind a loading boundary has answered 200
 * before it can say 404 or redirect (measured on Next 16.4: 200 instead of 404 and 307). Place one only in front
 * of what is slow, below the layout that checks who may see it.
 */
export function PageLoading({ label = "Loading the page" }: { label?: string }) {
  return (
    <div>
      <Skeleton className="mb-8 h-10 w-64 max-w-full" />
      <Loading label={label} lines={6} />
    </div>
  );
}
