"use client";

import { usePathname } from "next/navigation";
import { Steps } from "@/components/ui/Steps";

const STEPS = [
  { slug: "images", label: "Pictures" },
  { slug: "key", label: "Key and brief" },
  { slug: "pay", label: "Quality and pay" },
  { slug: "review", label: "Review and fund" },
];

/** Where in the four steps one is; each can be visited at any time. */
export function SetupSteps({ batchId }: { batchId: string }) {
  const pathname = usePathname();
  const current = STEPS.findIndex((step) => pathname.endsWith(`/setup/${step.slug}`));
  return (
    <Steps
      label="Steps to post a batch"
      className="mb-8"
      steps={STEPS.map((step, index) => ({
        label: step.label,
        href: `/batches/${batchId}/setup/${step.slug}`,
        state: index < current ? "done" : index === current ? "current" : "ahead",
      }))}
    />
  );
}
