import { Loading, Skeleton } from "@/components/ui/Skeleton";

export default function PageLoading() {
  return (
    <div className="max-w-page mx-auto w-full px-4 py-10 sm:px-6 lg:px-8">
      <Skeleton className="mb-8 h-10 w-64 max-w-full" />
      <Loading label="Loading the page" lines={6} />
    </div>
  );
}
