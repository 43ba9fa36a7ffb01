"use client";

import Link from "next/link";
import { signIn } from "next-auth/react";
import { useState, useTransition } from "react";
import { Button } from "@/components/ui/Button";
import { Notice } from "@/components/ui/Notice";

/** Spends a mail link's secret and goes to the person's first page. */
export function EnterByLink({ secret, label = "Sign in" }: { secret: string; label?: string }) {
  const [failed, setFailed] = useState(false);
  const [pending, startTransition] = useTransition();
  const enter = () =>
    startTransition(async () => {
      const answer = await signIn("link", { secret, redirect: false });
      if (answer?.ok) window.location.assign("/home");
      else setFailed(true);
    });
  if (failed) {
    return (
      <Notice
        kind="danger"
        live
        title="This link no longer works"
        action={<Link href="/sign-in">Ask for a new one</Link>}
      >
        It was used already, or it is too old.
      </Notice>
    );
  }
  return (
    <Button kind="primary" pending={pending} onClick={enter} className="justify-self-start">
      {label}
    </Button>
  );
}
