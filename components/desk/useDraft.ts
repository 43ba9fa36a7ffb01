"use client";

import { createStore, del, get, set } from "idb-keyval";
import { useCallback, useEffect, useRef, useState } from "react";
import type { DeskDocument } from "@/lib/contracts/desk";
import { statusOf, type DeskServices } from "./services";

export type SaveState = "saved" | "saving" | "offline" | "conflict" | "lost";

type Kept = { document: DeskDocument; version: number };

const SAVE_AFTER_MS = 800;
const RETRY_MS = 3000;

const keptDrafts = () => createStore("merestone-desk", "drafts");

/** What this browser kept of a claim's drawing: newer than the server's when the network was away. */
export async function findKeptDraft(claimId: string): Promise<Kept | undefined> {
  try {
    return await get<Kept>(claimId, keptDrafts());
  } catch {
    return undefined; // private browsing without IndexedDB: the server's draft is all there is
  }
}

/**
 * Keeps a drawing: in this browser at once, on the server within a second or so, and again until it is
 * there. `put` is called with each change.
 */
export function useDraft(claimId: string, firstVersion: number, services: DeskServices) {
  const [state, setState] = useState<SaveState>("saved");
  const version = useRef(firstVersion);
  const pending = useRef<DeskDocument | null>(null);
  const timer = useRef<ReturnType<typeof setTimeout>>(undefined);
  const running = useRef<Promise<void> | null>(null);

  const flush = useCallback(async (): Promise<void> => {
    clearTimeout(timer.current);
    if (running.current) await running.current;
    const document = pending.current;
    if (!document) return;
    pending.current = null;
    setState("saving");
    running.current = services
      .saveDraft(document, version.current)
      .then((answer) => {
        version.current = answer.version;
        setState(pending.current ? "saving" : "saved");
        return set(claimId, { document, version: answer.version }, keptDrafts()).catch(() => undefined);
      })
      .catch((error: unknown) => {
        const status = statusOf(error);
        if (status === 409) return setState("conflict");
        if (status === 410 || status === 404) return setState("lost");
        pending.current ??= document;
        setState("offline");
        timer.current = setTimeout(() => void flush(), RETRY_MS);
      })
      .finally(() => (running.current = null));
    await running.current;
  }, [claimId, services]);

  const put = useCallback(
    (document: DeskDocument): void => {
      pending.current = document;
      set(claimId, { document, version: version.current }, keptDrafts()).catch(() => undefined);
      setState((before) => (before === "conflict" || before === "lost" ? before : "saving"));
      clearTimeout(timer.current);
      timer.current = setTimeout(() => void flush(), SAVE_AFTER_MS);
    },
    [claimId, flush],
  );

  const forget = useCallback((): void => {
    pending.current = null;
    clearTimeout(timer.current);
    del(claimId, keptDrafts()).catch(() => undefined);
  }, [claimId]);

  useEffect(() => {
    const online = () => void flush();
    const hide = () => document.visibilityState === "hidden" && void flush();
    const leave = (event: BeforeUnloadEvent) => {
      if (pending.current) event.preventDefault();
    };
    window.addEventListener("online", online);
    window.addEventListener("beforeunload", leave);
    document.addEventListener("visibilitychange", hide);
    return () => {
      window.removeEventListener("online", online);
      window.removeEventListener("beforeunload", leave);
      document.removeEventListener("visibilitychange", hide);
      clearTimeout(timer.current);
      if (pending.current) void flush();
    };
  }, [flush]);

  return { state, put, flush, forget };
}
