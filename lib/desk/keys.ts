/**
 * The desk's keys. Each action has a letter or sign that a person can change; what every program agrees on
 * (Enter, Escape, Delete, arrows, numbers, Ctrl Z) stays as it is. Neighbouring keys do related work: J K L judge
 * what the tray deals, N M draw at the crosshair, the brackets walk through what is drawn.
 */
export const KEY_GROUPS = [
  {
    title: "The tray",
    actions: [
      { id: "take", key: "j", does: "take the dealt proposal as it is" },
      { id: "takeAndAdjust", key: "k", does: "take it and adjust it" },
      { id: "sendAway", key: "l", does: "not one: send it away" },
      { id: "dealtBefore", key: ",", does: "look at the one before" },
      { id: "dealtAfter", key: ".", does: "look at the one after" },
    ],
  },
  {
    title: "While drawing",
    actions: [
      { id: "extremes", key: "x", does: "the four points set are the extremes: top, left, bottom, right" },
      { id: "mend", key: "r", does: "mend an outline that crosses itself" },
      { id: "plotAtCursor", key: "n", does: "set a point of an outline at the crosshair; Enter closes it" },
      { id: "boxAtCursor", key: "m", does: "begin a box at the crosshair, and end it" },
    ],
  },
  {
    title: "What is selected",
    actions: [
      { id: "selectBefore", key: "[", does: "select the shape before" },
      { id: "selectAfter", key: "]", does: "select the next shape" },
      { id: "vertexAfter", key: "v", does: "hold its next point, to move by the arrows" },
      { id: "outline", key: "o", does: "outline what is in its box" },
      { id: "strokeInside", key: "y", does: "then drag over what belongs to it, and it is outlined anew" },
      { id: "strokeOutside", key: "u", does: "then drag over what does not belong to it" },
      { id: "extend", key: "a", does: "then draw: what you draw is added to it" },
      { id: "hole", key: "h", does: "then draw: what you draw is cut out of it" },
      { id: "split", key: "t", does: "then drag a line: it is parted in two" },
      { id: "join", key: "g", does: "then click another shape: both become one" },
      { id: "shareBorder", key: "s", does: "let its border run along the shapes that it touches" },
      { id: "occluded", key: "f", does: "partly hidden, or not" },
      { id: "truncated", key: "e", does: "cut by the edge, or not" },
      { id: "crowd", key: "c", does: "a crowd, or one" },
    ],
  },
  {
    title: "Seeing",
    actions: [
      { id: "fit", key: "w", does: "whole picture; with Shift, the selection" },
      { id: "zoomIn", key: "+", does: "zoom in" },
      { id: "zoomOut", key: "-", does: "zoom out" },
      { id: "hideClass", key: "b", does: "hide the shapes of the current class, or show them" },
      { id: "dim", key: "d", does: "dim what is drawn, or show it again" },
      { id: "brief", key: "i", does: "the brief" },
      { id: "help", key: "?", does: "this sheet" },
    ],
  },
] as const;

export type ActionId = (typeof KEY_GROUPS)[number]["actions"][number]["id"];
export type KeyTable = Readonly<Record<ActionId, string>>;

const ACTIONS = KEY_GROUPS.flatMap((group) => [...group.actions]);
const isAction = (id: string): id is ActionId => ACTIONS.some((action) => action.id === id);

export const DEFAULT_KEYS: KeyTable = tableOf((action) => action.key);

function tableOf(keyOf: (action: { id: ActionId; key: string }) => string): KeyTable {
  return Object.fromEntries(ACTIONS.map((action) => [action.id, keyOf(action)])) as KeyTable; // one entry an action
}

/** The action of a key, whatever its case. "=" counts as "+", which shares its key on many keyboards. */
export function actionOf(keys: KeyTable, key: string): ActionId | undefined {
  const pressed = key.toLowerCase();
  const found =
    ACTIONS.find((action) => keys[action.id] === pressed) ??
    (pressed === "=" ? ACTIONS.find((action) => keys[action.id] === "+") : undefined);
  return found?.id;
}

export type Rebinding = { ok: true; keys: KeyTable } | { ok: false; reason: string };

/** The table with another key for an action. A key has one meaning: one that is taken is refused by name. */
export function rebind(keys: KeyTable, id: ActionId, key: string): Rebinding {
  const wanted = key.toLowerCase();
  if ([...wanted].length !== 1 || /[\s0-9]/u.test(wanted)) {
    return { ok: false, reason: "Use one letter or sign; numbers stand for classes." };
  }
  const other = ACTIONS.find((action) => action.id !== id && keys[action.id] === wanted);
  if (other) return { ok: false, reason: `That key is in use: ${other.does}.` };
  return { ok: true, keys: { ...keys, [id]: wanted } };
}

/** Keys as kept by a browser. What cannot be read, or would give one key two meanings, falls back to the defaults. */
export function parseKeys(text: string | null): KeyTable {
  let kept: unknown;
  try {
    kept = JSON.parse(text ?? "{}");
  } catch {
    return DEFAULT_KEYS; // written by something else
  }
  if (typeof kept !== "object" || kept === null) return DEFAULT_KEYS;
  const own = Object.entries(kept).filter(
    (entry): entry is [ActionId, string] => isAction(entry[0]) && typeof entry[1] === "string",
  );
  const table = { ...DEFAULT_KEYS, ...Object.fromEntries(own) };
  return new Set(Object.values(table)).size === ACTIONS.length ? table : DEFAULT_KEYS;
}

/** Only what differs from the defaults, so that a later default reaches those who never changed it. */
export function keysText(keys: KeyTable): string {
  return JSON.stringify(
    Object.fromEntries(Object.entries(keys).filter(([id, key]) => isAction(id) && DEFAULT_KEYS[id] !== key)),
  );
}
