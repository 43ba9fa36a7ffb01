import { TriangleAlert } from "lucide-react";
import type { Metadata } from "next";
import { AgreedLine } from "@/components/marketing/AgreedLine";
import { BeforeYouAccept } from "@/components/marketing/BeforeYouAccept";
import { Journey } from "@/components/marketing/Journey";
import { Verdicts } from "@/components/marketing/Verdicts";
import { AppShell } from "@/components/shell/AppShell";
import { CAUTIONS } from "@/components/shell/cautions";
import { ButtonLink } from "@/components/ui/Button";

export const metadata: Metadata = { title: { absolute: "Merestone: instance labels that people agree on" } };

const SECTION = "max-w-page mx-auto w-full px-4 sm:px-6 lg:px-8";

export default function LandingPage() {
  return (
    <AppShell user={null} width="full" footer={false}>
      <section
        className={`${SECTION} grid items-center gap-x-12 gap-y-10 py-10 lg:grid-cols-[minmax(0,6fr)_minmax(0,7fr)] lg:py-12`}
      >
        <div>
          <h1 className="text-4xl font-semibold tracking-tight sm:text-5xl xl:text-[3.4rem]">
            Several people draw the edge. Where they agree becomes the record.
          </h1>
          <p className="text-muted mt-5 max-w-prose text-lg">
            Merestone makes instance labels for images: a class and a box or an outline for every object, at a
            quality that you can state and a price that you know before you pay.
          </p>
          <div className="border-line mt-8 grid gap-x-8 gap-y-6 border-t pt-6 sm:grid-cols-2">
            <div className="flex flex-col">
              <h2 className="text-xl font-semibold">You have images</h2>
              <p className="text-muted mt-1.5 mb-4">
                Post a batch, see what it will cost at worst, and take home exact files with their quality
                written on them.
              </p>
              <ButtonLink href="/join?role=requester" kind="primary" className="mt-auto self-start">
                Post a batch
              </ButtonLink>
            </div>
            <div className="flex flex-col">
              <h2 className="text-xl font-semibold">You draw</h2>
              <p className="text-muted mt-1.5 mb-4">
                Choose work by measured hourly pay, start from proposals, get a reason for every score, and be
                paid for what agrees.
              </p>
              <ButtonLink href="/join?role=annotator" className="mt-auto self-start">
                Draw for pay
              </ButtonLink>
            </div>
          </div>
        </div>
        <AgreedLine />
      </section>

      <section id="how" aria-labelledby="how-title" className="bg-sunk border-line border-y py-14 sm:py-20">
        <div className={SECTION}>
          <h2 id="how-title" className="mb-10 text-3xl font-semibold">
            How a batch goes
          </h2>
          <Journey />
        </div>
      </section>

      <section aria-labelledby="agree-title" className={`${SECTION} py-14 sm:py-20`}>
        <h2 id="agree-title" className="max-w-2xl text-3xl font-semibold">
          Three ways an image can end, and each is said plainly
        </h2>
        <div className="mt-10">
          <Verdicts />
        </div>
      </section>

      <section id="before" aria-labelledby="before-title" className={`${SECTION} pb-14 sm:pb-20`}>
        <h2 id="before-title" className="text-3xl font-semibold">
          What you see before you accept
        </h2>
        <p className="text-muted mt-2 mb-8 max-w-prose text-lg">
          Nobody signs a blank sheet. These lines are filled in before work or money changes hands.
        </p>
        <BeforeYouAccept />
      </section>

      <section
        aria-labelledby="cautions-title"
        className="bg-sheet border-waits mt-auto border-t-3 py-12 sm:py-14"
      >
        <div className={SECTION}>
          <h2 id="cautions-title" className="text-waits-ink flex items-center gap-3 text-2xl font-semibold">
            <TriangleAlert aria-hidden className="size-6" />
            Cautions
          </h2>
          <ul className="mt-6 grid gap-x-10 gap-y-6 md:grid-cols-3">
            {CAUTIONS.map((caution) => (
              <li key={caution.title}>
                <h3 className="font-text text-base font-bold">{caution.title}</h3>
                <p className="text-muted mt-1">{caution.text}</p>
              </li>
            ))}
          </ul>
        </div>
      </section>

      <footer className={`${SECTION} text-muted flex flex-wrap justify-between gap-x-8 gap-y-2 py-8 text-sm`}>
        <p className="max-w-prose">
          A merestone is the stone that neighbours agreed on to mark where one field ends and the next begins.
        </p>
      </footer>
    </AppShell>
  );
}
