import { createStore, del, get, set, type UseStore } from "idb-keyval";
import type { DeskDocument } from "@/lib/contracts/desk";
import { statusOf, type DeskServices } from "./services";

export type SaveState = "saved" | "saving" | "offline" | "signed-out" | "conflict" | "lost";

export type Kept = {
  document: DeskDocument;
  /** The server's version that the drawing was made on. */
  version: number;
  /** What was on its way to the server when this was kept. */
  sending: DeskDocument | null;
};

/**
 * Whether what this browser kept goes on from what the server has: it was made on that version, or that version is
 * our own save whose answer never arrived.
 */
export function isSequel(kept: Kept, server: { draft: DeskDocument | null; draftVersion: number }): boolean {
  if (kept.version === server.draftVersion) return true;
  if (kept.version + 1 !== server.draftVersion || !kept.sending) return false;
  return canonical(kept.sending) === canonical(server.draft);
}

/** Text of a drawing whatever the order of its fields: the server's copy went through its schema. */
function canonical(value: unknown): string {
  return JSON.stringify(value, (_, part: unknown) =>
    typeof part === "object" && part !== null && !Array.isArray(part)
      ? Object.fromEntries(Object.entries(part).toSorted(([a], [b]) => (a < b ? -1 : 1)))
      : part,
  );
}

const SAVE_AFTER_MS = 800;
const RETRY_MS = 3000;

let keptDrafts: UseStore | undefined;
const store = () => (keptDrafts ??= createStore("merestone-desk", "drafts"));

/** What this browser kept of a claim's drawing: newer than the server's when the network was away. */
export async function findKeptDraft(claimId: string): Promise<Kept | undefined> {
  try {
    return await get<Kept>(claimId, store());
  } catch {
    return undefined; // private browsing without IndexedDB: the server's draft is all there is
  }
}

/**
 * Keeps a drawing: in this browser at once, on the server within a second or so, and again until it is
 * there. Saves follow one another, each on the version that the last one made; another tab's save in between
 * is a conflict and nothing is overwritten.
 */
export class DraftKeeper {
  private state: SaveState = "saved";
  private pending: DeskDocument | null = null;
  private sending: DeskDocument | null = null;
  private timer: ReturnType<typeof setTimeout> | undefined;
  private running: Promise<void> | null = null;
  private listeners = new Set<() => void>();
  private isForgotten = false;

  constructor(
    private readonly claimId: string,
    private version: number,
    private readonly saveDraft: DeskServices["saveDraft"],
  ) {}

  subscribe = (listener: () => void): (() => void) => {
    this.listeners.add(listener);
    return () => this.listeners.delete(listener);
  };

  getState = (): SaveState => this.state;

  get hasUnsaved(): boolean {
    return this.pending !== null || this.running !== null;
  }

  /** Takes the drawing as it now is. */
  put(document: DeskDocument): void {
    if (this.isForgotten) return;
    this.pending = document;
    void this.keep(document);
    if (this.state === "conflict" || this.state === "lost") return;
    this.become("saving");
    // A hand that never rests is saved all the same: the first change of a series sets the time.
    if (!this.timer) this.later(SAVE_AFTER_MS);
  }

  /** Sends what is not on the server yet, and waits for the answer. */
  async flush(): Promise<void> {
    this.stopTimer();
    if (this.running) await this.running;
    if (!this.pending || this.state === "conflict" || this.state === "lost") return;
    const document = this.pending;
    this.pending = null;
    this.running = this.send(document).finally(() => (this.running = null));
    await this.running;
  }

  /** Drops the drawing: it was handed in or given back. */
  forget(): void {
    this.isForgotten = true;
    this.pending = null;
    this.stopTimer();
    void del(this.claimId, store()).catch(() => undefined);
  }

  private async send(document: DeskDocument): Promise<void> {
    this.become("saving");
    this.sending = document;
    await this.keep(document);
    try {
      this.version = (await this.saveDraft(document, this.version)).version;
      this.sending = null;
      if (this.isForgotten) return;
      await this.keep(this.pending ?? document);
      this.become(this.pending ? "saving" : "saved");
      if (this.pending && !this.timer) this.later(SAVE_AFTER_MS);
    } catch (error) {
      const status = statusOf(error);
      this.pending ??= document;
      if (status === 409) return this.become("conflict");
      if (status === 410 || status === 404) return this.become("lost");
      this.become(status === 401 ? "signed-out" : "offline");
      this.later(RETRY_MS);
    }
  }

  /** Writes to this browser's store, which puts writes of one key in the order that they were asked for. */
  private async keep(document: DeskDocument): Promise<void> {
    if (this.isForgotten) return;
    const kept: Kept = { document, version: this.version, sending: this.sending };
    // Without a store (private browsing) the server's draft is all there is.
    await set(this.claimId, kept, store()).catch(() => undefined);
  }

  private later(delayMs: number): void {
    this.stopTimer();
    this.timer = setTimeout(() => void this.flush(), delayMs);
  }

  private stopTimer(): void {
    clearTimeout(this.timer);
    this.timer = undefined;
  }

  private become(state: SaveState): void {
    this.state = state;
    for (const listener of this.listeners) listener();
  }
}
