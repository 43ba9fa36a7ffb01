import type { Metadata } from "next";
import Link from "next/link";
import { redirect } from "next/navigation";
import { getDb } from "@/db/client";
import { countPendingImages, countReadyImages, findBrief, listClasses } from "@/db/queries/batches";
import { CostPanel } from "@/components/batches/CostPanel";
import { ClassSwatch } from "@/components/ui/ClassSwatch";
import { Facts } from "@/components/ui/Stat";
import { Markdown } from "@/components/ui/Markdown";
import { Notice } from "@/components/ui/Notice";
import { Sheet } from "@/components/ui/Sheet";
import { orNotFound, requirePageActor } from "@/lib/auth/page";
import { requireBatch } from "@/lib/market/access";
import { blockersOf, quoteOf } from "@/lib/market/batches/publishBatch";
import { walletSummary } from "@/lib/market/money/queries";
import { FundForm } from "../_components/FundForm";

export const metadata: Metadata = { title: "Review and fund" };

type Props = { params: Promise<{ batchId: string }> };

export default async function ReviewStepPage({ params }: Props) {
  const actor = await requirePageActor("requester");
  const { batchId } = await params;
  const db = getDb();
  const batch = orNotFound(() => requireBatch(db, batchId, actor, "editor"));
  if (batch.status !== "draft") redirect(`/batches/${batchId}`);
  const key = listClasses(db, batchId);
  const brief = findBrief(db, batchId);
  const ready = countReadyImages(db, batchId);
  const cost = quoteOf(batch, key, ready);
  const blockers = blockersOf(batch, {
    ready,
    pending: countPendingImages(db, batchId),
    classCount: key.length,
    hasBrief: Boolean(brief),
  });
  const { balanceCents } = walletSummary(db, batch.teamId);
  return (
    <div className="grid items-start gap-6 lg:grid-cols-[1fr_22rem]">
      <div className="grid gap-6">
        <Sheet
          title="Quality and pay"
          actions={
            <Link className="link" href={`/batches/${batchId}/setup/pay`}>
              Change
            </Link>
          }
        >
          <Facts
            facts={[
              { term: "Annotators a picture", detail: `${batch.kMin} to ${batch.kMax}` },
              { term: "Agreement target", detail: `${Math.round(batch.agreementTarget * 100)} %` },
              { term: "Contest a result within", detail: `${batch.disputeWindowHours} hours` },
              { term: "Pictures", detail: ready },
            ]}
          />
        </Sheet>
        <Sheet
          title="The key"
          actions={
            <Link className="link" href={`/batches/${batchId}/setup/key`}>
              Change
            </Link>
          }
        >
          {key.length === 0 ? <p className="text-muted">No class yet.</p> : null}
          <ul className="grid gap-2 sm:grid-cols-2">
            {key.map((row) => (
              <li key={row.id} className="flex items-center gap-3">
                <ClassSwatch number={row.number} colour={row.colour} name={row.name} />
                <span className="text-muted text-sm">{row.geometry === "box" ? "box" : "outline"}</span>
              </li>
            ))}
          </ul>
        </Sheet>
        <Sheet title="The brief">
          {brief ? <Markdown>{brief.markdown}</Markdown> : <p className="text-muted">No brief yet.</p>}
        </Sheet>
        {batch.safetyCritical ? (
          <Notice kind="caution" title="Feeds a safety-critical system">
            Have the release reviewed by people qualified in that field before it is used. Agreement between
            annotators is not proof of correctness.
          </Notice>
        ) : null}
      </div>
      <div className="grid gap-4 lg:sticky lg:top-20">
        <CostPanel cost={cost} imageCount={ready} feeBps={batch.feeBps} />
        <FundForm
          batch={{ id: batch.id, title: batch.title, teamId: batch.teamId, version: batch.version }}
          holdCents={cost.worstCents + cost.worstFeeCents}
          balanceCents={balanceCents}
          blockers={blockers}
        />
      </div>
    </div>
  );
}
