import type { DeskDocument } from "@/lib/contracts/desk";

/** What the desk asks of the page around it. Rejections carry a message that can be shown. */
export type DeskServices = {
  /** Keeps the drawing; resolves with the version it now has. Rejects with status 409 when another tab saved. */
  saveDraft: (document: DeskDocument, version: number) => Promise<{ version: number }>;
  /** Extends the claim. */
  heartbeat: () => Promise<{ expiresAtMs: number }>;
  submit: (work: { document: DeskDocument; activeSeconds: number }) => Promise<void>;
  release: () => Promise<void>;
};

export type DeskMode = "annotate" | "redraw";

/** The status of a failed call, 0 when the network was away. */
export function statusOf(error: unknown): number {
  return typeof error === "object" && error !== null && "status" in error && typeof error.status === "number"
    ? error.status
    : 0;
}
