import { Money } from "@/components/ui/Money";
import { When } from "@/components/ui/When";

type TopUp = { id: string; amountCents: number; status: string; paidAtMs: number | null };

/** Card payments of a team with the receipt of each, and this year's statement. */
export function Receipts({ topUps, teamId }: { topUps: readonly TopUp[]; teamId: string }) {
  const paid = topUps.filter((topUp) => topUp.paidAtMs !== null);
  if (paid.length === 0) return null;
  const year = new Date(paid[0]?.paidAtMs ?? 0).getUTCFullYear();
  return (
    <details className="mt-6">
      <summary className="cursor-pointer font-semibold">Receipts and statements</summary>
      <ul className="divide-line mt-2 divide-y">
        <li className="py-2">
          <a className="link" href={`/api/papers/wallet?teamId=${teamId}&year=${year}`} download>
            Statement of {year} (PDF)
          </a>
        </li>
        {paid.map((topUp) => (
          <li key={topUp.id} className="flex flex-wrap items-baseline justify-between gap-3 py-2">
            <span>
              Card payment, <When at={topUp.paidAtMs ?? 0} form="date" />
            </span>
            <span className="flex items-baseline gap-4">
              <Money cents={topUp.amountCents} />
              <a className="link" href={`/api/papers/receipt?topUpId=${topUp.id}`} download>
                Receipt (PDF)
              </a>
            </span>
          </li>
        ))}
      </ul>
    </details>
  );
}
