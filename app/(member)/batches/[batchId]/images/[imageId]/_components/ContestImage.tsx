"use client";

import { ContestDialog, type KeyClass } from "@/app/(member)/_disputes/ContestDialog";
import { contest } from "../../../../actions";

type Props = { imageId: string; fileName: string; classes: readonly KeyClass[] };

/** Puts the picture on the docket, with a reason. */
export function ContestImage({ imageId, fileName, classes }: Props) {
  return (
    <ContestDialog
      label="Contest the result"
      title={`Contest ${fileName}?`}
      classes={classes}
      consequence="An admin looks at every outline and the brief, and keeps the result, picks one annotator's labels or draws it anew. Everybody concerned gets the reason. Pay is set right by the decision."
      send={(about) => contest(null, { imageId, ...about })}
    />
  );
}
