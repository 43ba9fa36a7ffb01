"use client";

import { ContestDialog, type KeyClass } from "@/app/(member)/_disputes/ContestDialog";
import { When } from "@/components/ui/When";
import { contest } from "../../actions";

type Props = { submissionId: string; closesAtMs: number; classes: readonly KeyClass[] };

/** Puts the own score on the docket, with a reason. */
export function ContestScore({ submissionId, closesAtMs, classes }: Props) {
  return (
    <ContestDialog
      label="Contest the score"
      title="Contest this score?"
      classes={classes}
      consequence={
        <>
          An admin looks at your outlines, those of the others, and the brief as it was when you claimed the
          picture, and writes a reason for the decision. Contesting never counts against you. It is possible
          until <When at={closesAtMs} />.
        </>
      }
      send={(about) => contest(null, { submissionId, ...about })}
    />
  );
}
