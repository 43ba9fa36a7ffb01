import { createStore, del, get, set, type UseStore } from "idb-keyval";
import type { DeskDocument } from "@/lib/contracts/desk";
import { statusOf, type DeskServices } from "./services";

export type SaveState = "saved" | "saving" | "offline" | "conflict" | "lost";

type Kept = { document: DeskDocument; version: number };

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
    void set(this.claimId, { document, version: this.version }, store()).catch(() => undefined);
    if (this.state !== "conflict" && this.state !== "lost") this.become("saving");
    this.later(SAVE_AFTER_MS);
  }

  /** Sends what is not on the server yet, and waits for the answer. */
  async flush(): Promise<void> {
    clearTimeout(this.timer);
    if (this.running) await this.running;
    if (!this.pending || this.state === "conflict") return;
    const document = this.pending;
    this.pending = null;
    this.running = this.send(document).finally(() => (this.running = null));
    await this.running;
  }

  /** Drops the drawing: it was handed in or given back. */
  forget(): void {
    this.isForgotten = true;
    this.pending = null;
    clearTimeout(this.timer);
    void del(this.claimId, store()).catch(() => undefined);
  }

  private async send(document: DeskDocument): Promise<void> {
    this.become("saving");
    try {
      this.version = (await this.saveDraft(document, this.version)).version;
      if (this.isForgotten) return;
      await set(this.claimId, { document: this.pending ?? document, version: this.version }, store()).catch(
        () => undefined,
      );
      this.become(this.pending ? "saving" : "saved");
    } catch (error) {
      const status = statusOf(error);
      this.pending ??= document;
      if (status === 409) return this.become("conflict");
      this.become(status === 410 || status === 404 ? "lost" : "offline");
      this.later(RETRY_MS);
    }
  }

  private later(delayMs: number): void {
    clearTimeout(this.timer);
    this.timer = setTimeout(() => void this.flush(), delayMs);
  }

  private become(state: SaveState): void {
    this.state = state;
    for (const listener of this.listeners) listener();
  }
}
