import type { Metadata } from "next";
import { PageHeader } from "@/components/ui/PageHeader";
import { ForgotForm } from "./_components/ForgotForm";

export const metadata: Metadata = { title: "Forgotten password" };

export default function ForgotPage() {
  return (
    <>
      <PageHeader title="Set a new password" lead="We mail you a link that works for an hour." />
      <ForgotForm />
    </>
  );
}
