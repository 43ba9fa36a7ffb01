"use client";

import { Button } from "@/components/ui/Button";
import { Dialog } from "@/components/ui/Dialog";
import { Markdown } from "@/components/ui/Markdown";

type Props = {
  title: string;
  markdown: string;
  version: number;
  examples: { url: string; caption: string }[];
};

/** The brief with its example pictures, before anything is accepted. */
export function BriefDialog({ title, markdown, version, examples }: Props) {
  return (
    <Dialog title={`Brief: ${title}`} trigger={<Button>Read the brief</Button>}>
      <Markdown>{markdown}</Markdown>
      {examples.length > 0 ? (
        <ul className="mt-5 grid gap-4 sm:grid-cols-2">
          {examples.map((example) => (
            <li key={example.url}>
              <img src={example.url} alt="" className="bg-sunk w-full" />
              <p className="text-muted mt-1 text-sm">{example.caption}</p>
            </li>
          ))}
        </ul>
      ) : null}
      <p className="text-muted mt-5 text-sm">
        Version {version}. Your work is judged by the version shown when you claim a picture.
      </p>
    </Dialog>
  );
}
