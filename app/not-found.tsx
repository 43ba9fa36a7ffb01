import type { Metadata } from "next";
import Link from "next/link";
import { Wordmark } from "@/components/shell/MerestoneMark";
import { ButtonLink } from "@/components/ui/Button";

export const metadata: Metadata = { title: "Not found" };

/** Also what a person sees of things that belong to others: it must not tell the two apart. */
export default function NotFound() {
  return (
    <main className="mx-auto flex min-h-dvh max-w-xl flex-col justify-center gap-6 px-6 py-16">
      <Link href="/" aria-label="Merestone, start" className="self-start">
        <Wordmark />
      </Link>
      <div>
        <h1 className="text-4xl font-semibold">No stone marks this place</h1>
        <p className="text-muted mt-3 text-lg">
          There is no page here, or it is not yours to see. If a colleague sent you the address, ask them to
          invite you to the batch, or sign in with the account that they invited.
        </p>
      </div>
      <div className="flex flex-wrap gap-2">
        <ButtonLink href="/" kind="primary">
          Go to the start
        </ButtonLink>
        <ButtonLink href="/sign-in">Sign in</ButtonLink>
      </div>
    </main>
  );
}
