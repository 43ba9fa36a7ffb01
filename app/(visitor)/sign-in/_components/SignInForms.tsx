"use client";

import Link from "next/link";
import { getSession, signIn } from "next-auth/react";
import { useActionState, useState, useTransition, type FormEvent } from "react";
import { Button } from "@/components/ui/Button";
import { Notice } from "@/components/ui/Notice";
import { Sheet } from "@/components/ui/Sheet";
import { SubmitButton } from "@/components/ui/SubmitButton";
import { TextInput } from "@/components/ui/TextInput";
import { mailSignInLink } from "../../actions";

const DEMO_PASSWORD = "wrack-line-2026";
const DEMO_PEOPLE = [
  { email: "ines.calder@skerrow.example", role: "requester" },
  { email: "tomas.brandt@skerrow.example", role: "annotator" },
  { email: "ada.merrin@merestone.example", role: "admin" },
];

type Props = { next: string | null; isDemo: boolean };

/** Two ways in: a password, or a link by mail. */
export function SignInForms({ next, isDemo }: Props) {
  const [problem, setProblem] = useState<string | null>(null);
  const [pending, startTransition] = useTransition();
  const [linkResult, mailLink] = useActionState(mailSignInLink, null);

  function enter(email: string, password: string): void {
    setProblem(null);
    startTransition(async () => {
      const answer = await signIn("password", { email, password, redirect: false });
      if (answer?.ok) {
        await getSession();
        window.location.assign(next ?? "/home");
        return;
      }
      const isWrong = !answer?.error || answer.error === "CredentialsSignin";
      setProblem(isWrong ? "The e-mail or the password is not right." : answer.error);
    });
  }

  function submit(event: FormEvent<HTMLFormElement>): void {
    event.preventDefault();
    const form = new FormData(event.currentTarget);
    enter(String(form.get("email")), String(form.get("password")));
  }

  return (
    <>
      <Sheet title="With your password">
        <form onSubmit={submit} className="grid gap-4" noValidate>
          {problem ? (
            <Notice kind="danger" live>
              {problem}
            </Notice>
          ) : null}
          <TextInput label="E-mail" name="email" type="email" autoComplete="username" required />
          <TextInput
            label="Password"
            name="password"
            type="password"
            autoComplete="current-password"
            required
          />
          <div className="flex flex-wrap items-center justify-between gap-3">
            <Button kind="primary" type="submit" pending={pending}>
              Sign in
            </Button>
            <Link href="/forgot" className="link">
              Forgot it?
            </Link>
          </div>
        </form>
      </Sheet>
      <Sheet title="With a link by mail" lead="No password needed; the link works once, for 15 minutes.">
        {linkResult?.ok ? (
          <Notice live title="Look in your mailbox">
            If {linkResult.value.email} has an account, a link is on its way.
          </Notice>
        ) : (
          <form action={mailLink} className="grid gap-4">
            <TextInput
              label="E-mail"
              name="email"
              type="email"
              autoComplete="email"
              required
              error={
                linkResult && !linkResult.ok ? (linkResult.fields.email ?? linkResult.message) : undefined
              }
            />
            <SubmitButton kind="quiet" className="justify-self-start">
              Send me a link
            </SubmitButton>
          </form>
        )}
      </Sheet>
      {isDemo ? (
        <Sheet title="Demo accounts" lead="This copy holds invented data; look around as anybody.">
          <div className="flex flex-wrap gap-2">
            {DEMO_PEOPLE.map((person) => (
              <Button key={person.role} pending={pending} onClick={() => enter(person.email, DEMO_PASSWORD)}>
                Enter as {person.role}
              </Button>
            ))}
          </div>
        </Sheet>
      ) : null}
    </>
  );
}
