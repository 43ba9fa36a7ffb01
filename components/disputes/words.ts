/** What a decision says, in a few words. */
export const OUTCOME_WORDS = {
  keep: "kept as it was",
  restore: "back to what was merged",
  pick: "one submission picked",
  redraw: "redrawn",
  broken: "set aside",
} as const;

/** What kind of error a dispute is about. */
export const ERROR_WORDS = {
  outline: "outline or box",
  class: "class",
  missing: "object left out",
  extra: "no object there",
  brief: "brief unclear or wrong",
  broken: "picture or program failed",
  other: "something else",
  disagreement: "no agreement",
} as const;

/** Whose fault a task was that is set aside. */
export const FAULT_WORDS = { brief: "the brief", picture: "the picture", product: "the product" } as const;
