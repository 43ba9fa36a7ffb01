import type { Metadata } from "next";
import { getDb } from "@/db/client";
import { listPayoutsOf } from "@/db/queries/payments";
import { findUser } from "@/db/queries/people";
import { Movements } from "@/components/money/Movements";
import { PayoutMark } from "@/components/money/PayoutMark";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { PageHeader } from "@/components/ui/PageHeader";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import { Cell, HeadCell, Row, RowHead, Table, TableBody, TableHead } from "@/components/ui/Table";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { refreshOnboarding } from "@/lib/market/money/payouts";
import { earnings } from "@/lib/market/money/queries";
import { DEFAULT_SCHEDULE, findPayoutSchedule } from "@/lib/market/money/payoutSchedule";
import { OnboardButton, PayoutButton } from "./_components/PayoutForms";
import { ScheduleForm } from "./_components/ScheduleForm";

export const metadata: Metadata = { title: "Earnings" };

type Props = { searchParams: Promise<{ onboarding?: string }> };

/** What an annotator has earned, what is on its way, and the way to the bank. */
export default async function EarningsPage({ searchParams }: Props) {
  const actor = await requirePageActor("annotator");
  const { onboarding } = await searchParams;
  if (onboarding === "done") await refreshOnboarding({ actor }).catch(() => false);
  const db = getDb();
  const person = findUser(db, actor.id);
  const money = earnings(db, actor.id);
  const payouts = listPayoutsOf(db, actor.id);
  const schedule = findPayoutSchedule(db, actor.id) ?? DEFAULT_SCHEDULE;
  const paidCents = payouts
    .filter((payout) => payout.status === "paid")
    .reduce((sum, payout) => sum + payout.amountCents, 0);
  const thisMonth = new Date().toISOString().slice(0, 7);
  return (
    <>
      <PageHeader
        title="Earnings"
        lead="Settled pay is yours at once. Ask for it whenever you like, or let it come by itself."
        actions={
          person?.payoutsEnabled ? (
            <PayoutButton payableCents={money.payableCents} />
          ) : (
            <OnboardButton hasAccount={Boolean(person?.stripeAccountId)} />
          )
        }
      />
      <div className="grid gap-6">
        {person?.payoutsEnabled ? null : (
          <Notice kind="caution" title="Where should the money go?">
            Payouts go to a bank account that you register with Stripe. What you earn until then is kept for
            you.
          </Notice>
        )}
        {money.debtCents > 0 ? (
          <Notice kind="caution" title="A decision was corrected after you were paid">
            <Money cents={money.debtCents} /> is taken from what you earn next. You can appeal to us.
          </Notice>
        ) : null}
        <Stats>
          <Stat caption="To be paid out" size="large">
            <Money cents={money.payableCents} />
          </Stat>
          <Stat caption="On its way">
            <Money
              cents={
                money.transitCents +
                payouts
                  .filter((payout) => payout.status === "sent")
                  .reduce((sum, payout) => sum + payout.amountCents, 0)
              }
            />
          </Stat>
          <Stat caption="Arrived">
            <Money cents={paidCents} />
          </Stat>
          <Stat caption="Earned this month">
            <Money cents={money.months.find((row) => row.month === thisMonth)?.cents ?? 0} />
          </Stat>
        </Stats>
        <Sheet
          title="Payout by itself"
          id="schedule"
          lead={
            schedule.dueAtMs === null ? (
              "Off: money goes out when you ask for it."
            ) : (
              <>
                Next on <When at={schedule.dueAtMs} />, if there is <Money cents={schedule.leastCents} /> or
                more.
              </>
            )
          }
        >
          <ScheduleForm
            rhythm={schedule.rhythm}
            weekday={schedule.weekday}
            leastCents={schedule.leastCents}
          />
        </Sheet>
        <Sheet title="Payouts">
          {payouts.length === 0 ? (
            <p className="text-muted">No payout yet.</p>
          ) : (
            <Table caption="Payouts">
              <TableHead>
                <HeadCell>Begun</HeadCell>
                <HeadCell>State</HeadCell>
                <HeadCell align="end">Amount</HeadCell>
              </TableHead>
              <TableBody>
                {payouts.map((payout) => (
                  <Row key={payout.id}>
                    <RowHead className="font-normal">
                      <When at={payout.createdAtMs} />
                      {payout.scheduledForMs === null ? null : (
                        <span className="text-muted block text-sm">by itself</span>
                      )}
                    </RowHead>
                    <Cell label="State">
                      <span>
                        <PayoutMark status={payout.status} />
                        {payout.failure ? (
                          <span className="text-muted block text-sm">{payout.failure}</span>
                        ) : null}
                      </span>
                    </Cell>
                    <Cell label="Amount" figure>
                      <Money cents={payout.amountCents} />
                    </Cell>
                  </Row>
                ))}
              </TableBody>
            </Table>
          )}
        </Sheet>
        <Sheet title="By month">
          {money.months.length === 0 ? (
            <p className="text-muted">Nothing earned yet.</p>
          ) : (
            <Table caption="Earnings by month">
              <TableHead>
                <HeadCell>Month</HeadCell>
                <HeadCell align="end">Earned</HeadCell>
                <HeadCell align="end">Statement</HeadCell>
              </TableHead>
              <TableBody>
                {money.months.map((row) => (
                  <Row key={row.month}>
                    <RowHead>{row.month}</RowHead>
                    <Cell label="Earned" figure>
                      <Money cents={row.cents} />
                    </Cell>
                    <Cell label="Statement" align="end">
                      <a
                        className="link"
                        href={`/api/papers/earnings?year=${row.month.slice(0, 4)}&month=${Number(row.month.slice(5))}`}
                        download
                      >
                        PDF
                      </a>
                    </Cell>
                  </Row>
                ))}
              </TableBody>
            </Table>
          )}
          <p className="text-muted mt-4 text-sm">
            Tax on earnings is a matter of local law; ask a licensed adviser.
          </p>
        </Sheet>
        <Sheet title="Movements">
          <Movements
            caption="Movements of your earnings"
            rows={money.movements}
            empty="Nothing has moved yet."
          />
        </Sheet>
      </div>
    </>
  );
}
