import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listTeamsOf } from "@/db/queries/people";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import { requirePageActor } from "@/lib/auth/page";
import { walletSummary } from "@/lib/market/money/queries";
import { listTopUpsOf } from "@/db/queries/payments";
import { Receipts } from "@/components/money/Receipts";
import { Movements } from "@/components/money/Movements";
import { RefundDialog, TopUpForm, WaitForPayment } from "./_components/WalletForms";

export const metadata: Metadata = { title: "Wallet" };

type Props = { searchParams: Promise<{ payment?: string }> };

/** A team's money: what is there, what came in and where it went. */
export default async function WalletPage({ searchParams }: Props) {
  const actor = await requirePageActor("requester");
  const { payment } = await searchParams;
  const db = getDb();
  return (
    <>
      <PageHeader
        title="Wallet"
        lead="Money for batches. What a batch does not spend comes back here, and goes back to your card when you ask."
      />
      {payment === "done" ? <WaitForPayment /> : null}
      {payment === "cancelled" ? (
        <Notice className="mb-6">The payment was cancelled; nothing was charged.</Notice>
      ) : null}
      <div className="grid gap-8">
        {listTeamsOf(db, actor.id).map((team) => {
          const wallet = walletSummary(db, team.id);
          return (
            <Sheet key={team.id} title={team.name}>
              <div className="grid items-start gap-6 lg:grid-cols-[16rem_1fr]">
                <div className="grid gap-4">
                  <Stats>
                    <Stat caption="In the wallet" size="large">
                      <Money cents={wallet.balanceCents} />
                    </Stat>
                  </Stats>
                  {team.role === "owner" && wallet.balanceCents > 0 ? (
                    <RefundDialog teamId={team.id} balanceCents={wallet.balanceCents} />
                  ) : null}
                </div>
                {team.role === "viewer" ? (
                  <p className="text-muted">Viewers look; owners and editors pay.</p>
                ) : (
                  <TopUpForm teamId={team.id} />
                )}
              </div>
              <Receipts topUps={listTopUpsOf(db, team.id)} teamId={team.id} />
              <Movements
                caption={`Movements of ${team.name}`}
                rows={wallet.movements}
                empty="Nothing has moved yet."
              />
            </Sheet>
          );
        })}
      </div>
    </>
  );
}
