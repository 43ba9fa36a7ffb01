import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { findUser } from "@/db/queries/people";
import { PageHeader } from "@/components/ui/PageHeader";
import { Facts } from "@/components/ui/Stat";
import { Sheet } from "@/components/ui/Sheet";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { AccountForm, EverywhereButton, PasswordForm } from "./_components/AccountForms";

export const metadata: Metadata = { title: "Account" };

export default async function AccountPage() {
  const actor = await requirePageActor();
  const person = findUser(getDb(), actor.id);
  if (!person) return null;
  return (
    <>
      <PageHeader title="Account" />
      <div className="grid max-w-2xl gap-6">
        <Sheet title="You">
          <Facts
            className="mb-5"
            facts={[
              { term: "E-mail", detail: person.email },
              { term: "Role", detail: person.role },
              { term: "Since", detail: <When at={person.createdAtMs} form="date" /> },
            ]}
          />
          <AccountForm
            name={person.name}
            acceptsSensitive={person.acceptsSensitive}
            isAnnotator={person.role === "annotator"}
          />
        </Sheet>
        <Sheet
          title="Password"
          lead={
            person.passwordHash
              ? "Setting a new one ends every session, this one too."
              : "You sign in by mail links. A password is optional; setting one ends every session, this one too."
          }
        >
          <PasswordForm hasPassword={person.passwordHash !== null} />
        </Sheet>
        <Sheet title="Sessions" lead="If you left a device somewhere, end every session at once.">
          <EverywhereButton />
        </Sheet>
      </div>
    </>
  );
}
