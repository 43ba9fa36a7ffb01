"use client";

import { Button, ButtonLink } from "@/components/ui/Button";
import { ErrorState } from "@/components/ui/ErrorState";

type Props = { error: unknown; retry: () => void };

/** What is left when a page fails: nothing of the cause, but a reference under which it was logged. */
export default function PageError({ error, retry }: Props) {
  return (
    <main className="mx-auto flex min-h-[70dvh] max-w-2xl flex-col justify-center px-4 py-16">
      <ErrorState
        title="This page could not be drawn up"
        reference={digestOf(error)}
        action={
          <>
            <Button kind="primary" onClick={retry}>
              Try again
            </Button>
            <ButtonLink href="/">Go to the start</ButtonLink>
          </>
        }
      >
        Something failed on our side. Drafts, submissions and money are stored before a page answers, so
        nothing that you were told was saved is lost.
      </ErrorState>
    </main>
  );
}

function digestOf(error: unknown): string | undefined {
  const hasDigest = typeof error === "object" && error !== null && "digest" in error;
  return hasDigest && typeof error.digest === "string" ? error.digest : undefined;
}
