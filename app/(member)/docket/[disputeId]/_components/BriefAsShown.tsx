import { Markdown } from "@/components/ui/Markdown";
import { Sheet } from "@/components/ui/Sheet";
import { wordDiff } from "@/lib/market/disputes/wordDiff";

type Props = {
  /** The version by which the case is judged. */
  version: number;
  briefs: readonly { version: number; markdown: string }[];
  current: { version: number; markdown: string };
  /** Who was shown which version, in words. */
  shownTo: string;
};

/** The brief as it was shown at the claim, and word by word what was changed since. */
export function BriefAsShown({ version, briefs, current, shownTo }: Props) {
  const judged = briefs.find((brief) => brief.version === version);
  const others = briefs.filter((brief) => brief.version !== version && brief.version !== current.version);
  return (
    <Sheet title={`The brief, version ${version}, as it was shown`} lead={shownTo}>
      <Markdown>{judged?.markdown ?? ""}</Markdown>
      {version === current.version ? (
        <p className="text-muted mt-4 text-sm">It has not been changed since.</p>
      ) : (
        <Changes
          title={`What version ${current.version}, the current one, changed`}
          note="The case is judged by what was shown; this is for your orientation."
          before={judged?.markdown ?? ""}
          after={current.markdown}
        />
      )}
      {others.map((brief) => (
        <Changes
          key={brief.version}
          title={`Version ${brief.version}, shown to others, against version ${version}`}
          before={judged?.markdown ?? ""}
          after={brief.markdown}
        />
      ))}
    </Sheet>
  );
}

function Changes(props: { title: string; note?: string; before: string; after: string }) {
  return (
    <section className="border-line mt-5 border-t pt-4" aria-label={props.title}>
      <h3 className="font-semibold">{props.title}</h3>
      {props.note ? <p className="text-muted text-sm">{props.note}</p> : null}
      <p className="mt-2 max-w-prose whitespace-pre-wrap">
        {wordDiff(props.before, props.after).map((part, index) =>
          part.kind === "same" ? (
            <span key={index}>{part.text}</span>
          ) : part.kind === "added" ? (
            <ins key={index} className="bg-agreed-soft text-agreed-ink decoration-2 underline-offset-2">
              <span className="sr-only">added: </span>
              {part.text}
            </ins>
          ) : (
            <del key={index} className="bg-disputed-soft text-disputed-ink">
              <span className="sr-only">removed: </span>
              {part.text}
            </del>
          ),
        )}
      </p>
    </section>
  );
}
