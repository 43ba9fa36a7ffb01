import { getDb } from "@/db/client";
import type { DisputeRow } from "@/db/queries/work";
import { ERROR_WORDS, OUTCOME_WORDS } from "@/components/disputes/words";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { When } from "@/components/ui/When";
import { nowMs } from "@/lib/clock";
import { appealClosesAtMs, findAppealOf, mayAppeal } from "@/lib/market/disputes/appeal";
import { AppealDecision, WithdrawDispute } from "./DisputeButtons";

/** What was contested, decided and appealed about one picture, newest first, with what this person can do. */
export function DisputeNotices({ disputes, actorId }: { disputes: readonly DisputeRow[]; actorId: string }) {
  const now = nowMs();
  return disputes
    .filter((dispute) => dispute.status !== "withdrawn")
    .map((dispute) =>
      dispute.status === "open" ? (
        <OpenNotice key={dispute.id} dispute={dispute} isOwn={dispute.openedBy === actorId} now={now} />
      ) : (
        <DecidedNotice key={dispute.id} dispute={dispute} actorId={actorId} now={now} />
      ),
    );
}

function OpenNotice({ dispute, isOwn, now }: { dispute: DisputeRow; isOwn: boolean; now: number }) {
  const isAppeal = dispute.appealOf !== null;
  return (
    <Notice
      kind="caution"
      title={`${isAppeal ? "An appeal is on the docket" : "On the docket"}: ${ERROR_WORDS[dispute.errorKind]}`}
      action={isOwn ? <WithdrawDispute disputeId={dispute.id} isAppeal={isAppeal} /> : null}
    >
      <p className="whitespace-pre-line">
        {isOwn ? "You wrote: " : ""}
        {dispute.reason}
      </p>
      <p className="mt-1 text-sm">
        {dispute.dueAtMs < now ? "A decision was due " : "A decision is due "}
        <When at={dispute.dueAtMs} form="relative" />. The evidence is frozen as it was when this was opened.
      </p>
    </Notice>
  );
}

function DecidedNotice({ dispute, actorId, now }: { dispute: DisputeRow; actorId: string; now: number }) {
  const db = getDb();
  const closesAtMs = appealClosesAtMs(db, dispute);
  const appealed = findAppealOf(db, dispute.id);
  const outcome = dispute.decision ? OUTCOME_WORDS[dispute.decision.outcome] : "decided";
  return (
    <Notice
      title={`${dispute.appealOf ? "Decided on appeal" : "Decided by an admin"}: ${outcome}`}
      action={
        closesAtMs !== null && mayAppeal(db, dispute, actorId, now) ? (
          <AppealDecision disputeId={dispute.id} closesAtMs={closesAtMs} />
        ) : null
      }
    >
      <p className="whitespace-pre-line">{dispute.decisionReason}</p>
      {dispute.decision?.outcome === "broken" ? (
        <p className="mt-1">It counts against nobody, and the work on it is paid.</p>
      ) : null}
      <p className="mt-1 text-sm">
        {dispute.decidedAtMs === null ? null : <When at={dispute.decidedAtMs} />}
        {dispute.movedCents ? (
          <>
            , pay of all who drew it moved by <Money cents={dispute.movedCents} signed />
          </>
        ) : null}
        {dispute.citedIds.length > 0
          ? `, following ${dispute.citedIds.length} earlier ${dispute.citedIds.length === 1 ? "decision" : "decisions"}`
          : ""}
        .{" "}
        {dispute.appealOf
          ? "This is final here; what the law of your place gives you beyond it is yours."
          : appealed
            ? "It was appealed."
            : closesAtMs !== null && now > closesAtMs
              ? "The time for an appeal is over."
              : null}
      </p>
    </Notice>
  );
}
