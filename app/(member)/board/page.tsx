import type { Metadata } from "next";
import Link from "next/link";
import { getDb } from "@/db/client";
import { findBrief, findImage, listBriefExamples, listClasses } from "@/db/queries/batches";
import { findUser } from "@/db/queries/people";
import { listBoard, listLiveClaims, measureBatch } from "@/db/queries/work";
import { ButtonLink } from "@/components/ui/Button";
import { ClassSwatch } from "@/components/ui/ClassSwatch";
import { EmptyState } from "@/components/ui/EmptyState";
import { Money } from "@/components/ui/Money";
import { PageHeader } from "@/components/ui/PageHeader";
import { Notice } from "@/components/ui/Notice";
import { formatDuration } from "@/components/ui/Figures";
import { Sheet } from "@/components/ui/Sheet";
import { Stat, Stats } from "@/components/ui/Stat";
import { StateMark } from "@/components/ui/StateMark";
import { When } from "@/components/ui/When";
import { requirePageActor } from "@/lib/auth/page";
import { nowMs } from "@/lib/clock";
import { BriefDialog } from "./_components/BriefDialog";
import { ClaimButton } from "./_components/ClaimButton";

export const metadata: Metadata = { title: "Board" };

/** The batches that are open for work, with everything one should know before accepting. */
export default async function BoardPage() {
  const actor = await requirePageActor("annotator");
  const db = getDb();
  const person = findUser(db, actor.id);
  const rows = listBoard(db, actor.id, person?.acceptsSensitive ?? false);
  const claims = listLiveClaims(db, actor.id, nowMs());
  return (
    <>
      <PageHeader
        title="Board"
        lead="Open batches, with pay and time as measured so far. Nothing is binding before you hand in."
      />
      {claims.length > 0 ? (
        <Notice title="You hold a picture" className="mb-6">
          <ul>
            {claims.map((claim) => (
              <li key={claim.id}>
                <Link href={`/desk/${claim.id}`}>
                  Go on with {findImage(db, claim.imageId)?.fileName ?? "it"}
                </Link>
                , held until <When at={claim.expiresAtMs} form="time" />
              </li>
            ))}
          </ul>
        </Notice>
      ) : null}
      {rows.length === 0 ? (
        <EmptyState
          title="No batch is open at the moment"
          action={<ButtonLink href="/account">Look at your settings</ButtonLink>}
        >
          New ones appear here by themselves. Batches with sensitive content are shown only if you opt in on
          your account page.
        </EmptyState>
      ) : (
        <ul className="grid gap-6">
          {rows.map(({ batch, teamName, openImages, mySubmissions }) => {
            const measured = measureBatch(db, batch.id);
            const key = listClasses(db, batch.id);
            const examples = listBriefExamples(db, batch.id);
            const isBelowFloor =
              measured.hourlyCents !== null &&
              measured.tasks >= 10 &&
              measured.hourlyCents < batch.floorHourlyCents;
            return (
              <li key={batch.id}>
                <Sheet
                  title={batch.title}
                  lead={`Posted by ${teamName}`}
                  actions={
                    <>
                      <BriefDialog
                        title={batch.title}
                        markdown={findBrief(db, batch.id)?.markdown ?? ""}
                        version={batch.briefVersion}
                        examples={examples.map(({ imageId, caption }) => ({
                          url: `/api/images/${imageId}/thumb`,
                          caption,
                        }))}
                      />
                      <ClaimButton
                        batchId={batch.id}
                        openImages={openImages}
                        sensitiveNote={batch.sensitive ? batch.sensitiveNote || "Sensitive content." : null}
                      />
                    </>
                  }
                >
                  {batch.sensitive ? (
                    <p className="mb-4">
                      <StateMark state="waits">sensitive content</StateMark>{" "}
                      <span className="text-muted">{batch.sensitiveNote}</span>
                    </p>
                  ) : null}
                  {isBelowFloor ? (
                    <Notice kind="caution" className="mb-4" title="Measured pay is below the batch's floor">
                      The floor is <Money cents={batch.floorHourlyCents} /> an hour. Minimum pay is a matter
                      of local law.
                    </Notice>
                  ) : null}
                  <Stats>
                    <Stat
                      caption="Pay an hour, median"
                      note={
                        measured.hourlyCents === null ? (
                          "nothing measured yet"
                        ) : (
                          <>
                            a tenth earned below <Money cents={Math.round(measured.p10HourlyCents ?? 0)} />;{" "}
                            {measured.tasks} tasks
                          </>
                        )
                      }
                    >
                      {measured.hourlyCents === null ? (
                        "–"
                      ) : (
                        <Money cents={Math.round(measured.hourlyCents)} />
                      )}
                    </Stat>
                    <Stat
                      caption="A picture"
                      note={
                        <>
                          at most <Money cents={batch.capCents} />
                        </>
                      }
                    >
                      {measured.medianPayCents === null ? (
                        <Money cents={batch.baseCents} />
                      ) : (
                        <Money cents={measured.medianPayCents} />
                      )}
                    </Stat>
                    <Stat caption="Time a picture, median">
                      {measured.medianSeconds === null ? "–" : formatDuration(measured.medianSeconds * 1000)}
                    </Stat>
                    <Stat
                      caption="Waiting for you"
                      note={mySubmissions > 0 ? `you handed in ${mySubmissions}` : undefined}
                    >
                      {openImages}
                    </Stat>
                  </Stats>
                  <p className="text-muted mt-4">
                    Base <Money cents={batch.baseCents} /> a picture, plus{" "}
                    {key.some((row) => row.geometry === "polygon") ? (
                      <>
                        <Money cents={batch.polygonCents} /> an agreed outline
                      </>
                    ) : null}
                    {key.some((row) => row.geometry === "polygon") &&
                    key.some((row) => row.geometry === "box")
                      ? ", "
                      : null}
                    {key.some((row) => row.geometry === "box") ? (
                      <>
                        <Money cents={batch.boxCents} /> an agreed box
                      </>
                    ) : null}
                    . {batch.kMin} to {batch.kMax} people draw each picture; you are scored against the
                    others.
                  </p>
                  <ul
                    className="mt-4 flex flex-wrap gap-x-6 gap-y-2"
                    aria-label={`The key of ${batch.title}`}
                  >
                    {key.map((row) => (
                      <li key={row.id}>
                        <ClassSwatch number={row.number} colour={row.colour} name={row.name} />
                      </li>
                    ))}
                  </ul>
                </Sheet>
              </li>
            );
          })}
        </ul>
      )}
    </>
  );
}
