import { lazy, Suspense, type ComponentType } from "react";

/** What the desk needs of next/dynamic, without Next. */
export default function dynamic<P extends object>(load: () => Promise<ComponentType<P>>): ComponentType<P> {
  const Loaded = lazy(async () => ({ default: await load() }));
  return function Dynamic(props: P) {
    return (
      <Suspense fallback={null}>
        <Loaded {...props} />
      </Suspense>
    );
  };
}
