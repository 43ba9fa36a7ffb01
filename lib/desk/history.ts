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

/**
 * Does a command as part of the last undo step: a key held down is one gesture. The step then takes back
 * both. Without a step to join it is one of its own.
 */
export function amend(history: History, command: Command): History {
  const last = history.undoable.at(-1);
  if (!last) return perform(history, command);
  const { document, inverse } = apply(history.document, command);
  if (document === history.document) return history;
  // The state before the last step is restored by its own inverse alone when both change the same fields.
  const joined: Command = covers(last, inverse) ? last : { type: "all", commands: [inverse, last] };
  return { document, undoable: [...history.undoable.slice(0, -1), joined], redoable: [] };
}

function covers(first: Command, second: Command): boolean {
  if (first.type !== "change" || second.type !== "change" || first.id !== second.id) return false;
  return Object.keys(second.to).every((name) => name in first.to);
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
