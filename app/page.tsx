import { AppShell } from "@/components/shell/AppShell";
import { PageHeader } from "@/components/ui/PageHeader";

export default function LandingPage() {
  return (
    <AppShell user={null}>
      <PageHeader title="Where they agree becomes the record" />
    </AppShell>
  );
}
