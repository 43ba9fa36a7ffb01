import type { DeskDocument } from "@/lib/contracts/desk";
import { apply, type Command } from "./document";

/** A drawing with everything that can be undone and redone. Immutable. */
export type History = {
  readonly document: DeskDocument;
  readonly undoable: readonly Command[];
  readonly redoable: readonly Command[];
};

export function historyOf(document: DeskDocument): History {
  return { document, undoable: [], redoable: [] };
}

/** Does a command as one undo step. What was undone before can no longer be redone. */
export function perform(history: History, command: Command): History {
  const { document, inverse } = apply(history.document, command);
  if (document === history.document) return history;
  return { document, undoable: [...history.undoable, inverse], redoable: [] };
}

export function undo(history: History): History {
  const command = history.undoable.at(-1);
  if (!command) return history;
  const { document, inverse } = apply(history.document, command);
  return { document, undoable: history.undoable.slice(0, -1), redoable: [...history.redoable, inverse] };
}

export function redo(history: History): History {
  const command = history.redoable.at(-1);
  if (!command) return history;
  const { document, inverse } = apply(history.document, command);
  return { document, undoable: [...history.undoable, inverse], redoable: history.redoable.slice(0, -1) };
}
