import { CAUTIONS } from "./cautions";
import { MerestoneMark } from "./MerestoneMark";

/** The foot of every page: the cautions in small type, never left out. */
export function Footer() {
  return (
    <footer className="border-line mt-auto border-t">
      <div className="max-w-page mx-auto grid gap-x-10 gap-y-6 px-4 py-10 text-sm sm:px-6 md:grid-cols-[auto_1fr_1fr_1fr] lg:px-8">
        <MerestoneMark className="size-8" />
        {CAUTIONS.map((caution) => (
          <p key={caution.title} className="text-muted">
            <strong className="text-ink block font-semibold">{caution.title}</strong>
            {caution.text}
          </p>
        ))}
      </div>
    </footer>
  );
}
