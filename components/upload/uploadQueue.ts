import { createStore, del, entries, set, type UseStore } from "idb-keyval";
import type { UploadPlan } from "@/lib/contracts/batches";
import { IMAGE_BYTES_MAX, IMAGE_TYPES } from "@/lib/contracts/batches";

export type UploadState =
  "reading" | "waiting" | "sending" | "paused" | "sent" | "failed" | "duplicate" | "refused";

export type UploadItem = {
  readonly key: string;
  readonly name: string;
  readonly byteSize: number;
  readonly state: UploadState;
  readonly sentBytes: number;
  /** Why it failed, was refused or is a duplicate. */
  readonly reason: string | null;
};

type Entry = { -readonly [K in keyof UploadItem]: UploadItem[K] } & {
  file: File;
  sha256: string | null;
  plan: UploadPlan | null;
  abort: AbortController | null;
};

/** Files on their way at once; more would only share the same line. */
const AT_ONCE = 4;
const PLANS_AT_ONCE = 40;

/**
 * Uploads of one batch: read and hash, announce, send straight to the object store, report. Knows nothing
 * of React; `subscribe` and `getItems` feed useSyncExternalStore. Files that are under way are kept in
 * IndexedDB, so that a reload goes on where it stopped; the parts that arrived are not sent again.
 */
export class UploadQueue {
  private entries: Entry[] = [];
  private items: readonly UploadItem[] = [];
  private listeners = new Set<() => void>();
  private isPaused = false;
  private isReading = false;
  private isPlanning = false;
  private store: UseStore | null = null;

  constructor(
    private readonly batchId: string,
    private readonly onSent: () => void,
  ) {}

  subscribe = (listener: () => void): (() => void) => {
    this.listeners.add(listener);
    return () => this.listeners.delete(listener);
  };

  getItems = (): readonly UploadItem[] => this.items;

  /** Takes up what an earlier visit left unfinished. Returns how many files. */
  async restore(): Promise<number> {
    try {
      this.store = createStore("merestone-uploads", "files");
      const kept = await entries<string, File>(this.store);
      const mine = kept.filter(([key]) => key.startsWith(`${this.batchId}/`)).map(([, file]) => file);
      if (mine.length > 0) this.add(mine);
      return mine.length;
    } catch {
      this.store = null; // private browsing: a reload then asks for the files again
      return 0;
    }
  }

  add(files: readonly File[]): void {
    const present = new Set(this.entries.map((entry) => entry.key));
    for (const file of files) {
      const key = `${file.name}/${file.size}/${file.lastModified}`;
      if (present.has(key)) continue;
      present.add(key);
      const refusal = refusalOf(file);
      this.entries.push({
        key,
        name: file.name,
        byteSize: file.size,
        state: refusal ? "refused" : this.isPaused ? "paused" : "reading",
        sentBytes: 0,
        reason: refusal,
        file,
        sha256: null,
        plan: null,
        abort: null,
      });
    }
    this.changed();
    void this.read();
  }

  pause(): void {
    this.isPaused = true;
    for (const entry of this.entries) {
      if (entry.state === "reading" || entry.state === "waiting" || entry.state === "sending")
        entry.state = "paused";
      entry.abort?.abort();
    }
    this.changed();
  }

  resume(): void {
    this.isPaused = false;
    for (const entry of this.entries) if (entry.state === "paused") this.again(entry);
    this.changed();
    void this.read();
    void this.announce();
  }

  retry(key?: string): void {
    for (const entry of this.entries) {
      if (entry.state === "failed" && (key === undefined || entry.key === key)) this.again(entry);
    }
    this.changed();
    void this.read();
    void this.announce();
  }

  /** Takes an item off the list, ending its upload. */
  drop(key: string): void {
    const entry = this.entries.find((candidate) => candidate.key === key);
    entry?.abort?.abort();
    if (entry) void this.forget(entry);
    this.entries = this.entries.filter((candidate) => candidate.key !== key);
    this.changed();
  }

  /** Takes finished items off the list. */
  clearFinished(): void {
    this.entries = this.entries.filter((entry) => !["sent", "duplicate", "refused"].includes(entry.state));
    this.changed();
  }

  get paused(): boolean {
    return this.isPaused;
  }

  private again(entry: Entry): void {
    entry.plan = null; // addresses expire, and the answer knows which parts arrived
    entry.reason = null;
    entry.state = entry.sha256 ? "waiting" : "reading";
  }

  private async read(): Promise<void> {
    if (this.isReading) return;
    this.isReading = true;
    try {
      for (;;) {
        const entry = this.entries.find((candidate) => candidate.state === "reading");
        if (!entry || this.isPaused) break;
        try {
          entry.sha256 = await sha256Of(entry.file);
          const twin = this.entries.find(
            (other) => other !== entry && other.sha256 === entry.sha256 && other.state !== "failed",
          );
          if (twin) {
            entry.state = "duplicate";
            entry.reason = `The same picture is here already as ${twin.name}.`;
            this.changed();
            continue;
          }
          if (entry.state === "reading") entry.state = "waiting";
          if (this.store)
            await set(`${this.batchId}/${entry.sha256}`, entry.file, this.store).catch(() => undefined);
        } catch {
          fail(entry, "The file cannot be read any more. Choose it again.");
        }
        this.changed();
        void this.announce();
      }
    } finally {
      this.isReading = false;
    }
  }

  /** Asks what to do with the files that are read; then sends. */
  private async announce(): Promise<void> {
    if (this.isPlanning || this.isPaused) return;
    this.isPlanning = true;
    try {
      for (;;) {
        const fresh = this.entries
          .filter((entry) => entry.state === "waiting" && !entry.plan)
          .slice(0, PLANS_AT_ONCE);
        if (fresh.length === 0 || this.isPaused) break;
        const plans = await this.askForPlans(fresh);
        fresh.forEach((entry, index) => {
          const plan = plans?.[index];
          if (!plan) fail(entry, "The server did not answer. Try again.");
          else if (plan.kind === "refused") [entry.state, entry.reason] = ["refused", plan.reason];
          else if (plan.kind === "duplicate")
            [entry.state, entry.reason] = [
              "duplicate",
              `The same picture is here already as ${plan.fileName}.`,
            ];
          else entry.plan = plan;
          if (entry.state === "refused" || entry.state === "duplicate") void this.forget(entry);
        });
        this.changed();
        this.send();
      }
    } finally {
      this.isPlanning = false;
    }
    this.send();
  }

  private async askForPlans(fresh: Entry[]): Promise<UploadPlan[] | null> {
    const files = fresh.map((entry) => ({
      name: entry.name,
      byteSize: entry.byteSize,
      mediaType: mediaTypeOf(entry.file),
      sha256: entry.sha256,
    }));
    const answer = await postJson(`/api/batches/${this.batchId}/images`, { files }).catch(() => null);
    if (!answer?.ok) return null;
    return ((await answer.json()) as { plans: UploadPlan[] }).plans;
  }

  private send(): void {
    if (this.isPaused) return;
    let free = AT_ONCE - this.entries.filter((entry) => entry.state === "sending").length;
    for (const entry of this.entries) {
      if (free <= 0) break;
      if (entry.state !== "waiting" || !entry.plan) continue;
      free -= 1;
      entry.state = "sending";
      void this.sendOne(entry);
    }
    this.changed();
  }

  private async sendOne(entry: Entry): Promise<void> {
    const abort = new AbortController();
    entry.abort = abort;
    try {
      const plan = entry.plan;
      if (plan?.kind === "put") {
        await put(
          plan.url,
          entry.file,
          plan.headers,
          abort.signal,
          (bytes) => this.progress(entry, bytes),
          [412],
        );
        await this.report(plan.imageId, []);
      } else if (plan?.kind === "parts") {
        await this.report(plan.imageId, await this.sendParts(entry, plan, abort.signal));
      }
      entry.state = "sent";
      entry.sentBytes = entry.byteSize;
      void this.forget(entry);
      this.onSent();
    } catch (error) {
      if (!abort.signal.aborted)
        fail(entry, error instanceof Error ? error.message : "The upload broke off.");
    } finally {
      entry.abort = null;
      this.changed();
      this.send();
    }
  }

  private async sendParts(entry: Entry, plan: Extract<UploadPlan, { kind: "parts" }>, signal: AbortSignal) {
    const done = new Map(plan.present.map((part) => [part.number, part.etag]));
    for (const part of plan.parts) {
      const before = (part.number - 1) * plan.partBytes;
      if (!done.has(part.number)) {
        const slice = entry.file.slice(before, before + plan.partBytes);
        const etag = await put(part.url, slice, {}, signal, (bytes) => this.progress(entry, before + bytes));
        done.set(part.number, etag);
      }
      this.progress(entry, Math.min(before + plan.partBytes, entry.byteSize));
    }
    return [...done].map(([number, etag]) => ({ number, etag }));
  }

  private async report(imageId: string, parts: { number: number; etag: string }[]): Promise<void> {
    const answer = await postJson(`/api/images/${imageId}/uploaded`, { parts });
    if (!answer.ok) throw new Error("The server could not take the file. Try again.");
  }

  private async forget(entry: Entry): Promise<void> {
    if (this.store && entry.sha256)
      await del(`${this.batchId}/${entry.sha256}`, this.store).catch(() => undefined);
  }

  private progress(entry: Entry, bytes: number): void {
    entry.sentBytes = bytes;
    this.changed();
  }

  private changed(): void {
    this.items = this.entries.map(({ key, name, byteSize, state, sentBytes, reason }) => ({
      key,
      name,
      byteSize,
      state,
      sentBytes,
      reason,
    }));
    for (const listener of this.listeners) listener();
  }
}

function fail(entry: Entry, reason: string): void {
  entry.state = "failed";
  entry.reason = reason;
}

function mediaTypeOf(file: File): string {
  if (file.type) return file.type;
  return /\.tiff?$/i.test(file.name) ? "image/tiff" : /\.avif$/i.test(file.name) ? "image/avif" : "";
}

function refusalOf(file: File): string | null {
  if (file.size === 0) return "The file is empty.";
  if (file.size > IMAGE_BYTES_MAX) return "Over 50 MB.";
  if (!(IMAGE_TYPES as readonly string[]).includes(mediaTypeOf(file)))
    return "Not a JPEG, PNG, WebP, AVIF or TIFF picture.";
  return null;
}

async function sha256Of(file: File): Promise<string> {
  const digest = await crypto.subtle.digest("SHA-256", await file.arrayBuffer());
  return Array.from(new Uint8Array(digest), (byte) => byte.toString(16).padStart(2, "0")).join("");
}

function postJson(url: string, body: unknown): Promise<Response> {
  return fetch(url, {
    method: "POST",
    headers: { "content-type": "application/json" },
    body: JSON.stringify(body),
  });
}

/** PUTs a body with progress (fetch has none for uploads) and answers with the entity tag. */
function put(
  url: string,
  body: Blob,
  headers: Record<string, string>,
  signal: AbortSignal,
  onProgress: (bytes: number) => void,
  alsoFine: readonly number[] = [],
): Promise<string> {
  return new Promise((resolve, reject) => {
    const request = new XMLHttpRequest();
    request.open("PUT", url);
    for (const [name, value] of Object.entries(headers)) request.setRequestHeader(name, value);
    request.upload.onprogress = (event) => onProgress(event.loaded);
    request.onload = () => {
      // 412: the very same object arrived before, and only the answer was lost.
      if (request.status < 300 || alsoFine.includes(request.status))
        resolve(request.getResponseHeader("etag") ?? "");
      else reject(new Error(`The store refused the file (${request.status}).`));
    };
    request.onerror = () => reject(new Error("The network broke off."));
    request.onabort = () => reject(new Error("Paused."));
    signal.addEventListener("abort", () => request.abort(), { once: true });
    request.send(body);
  });
}
