"use client";

import { useCallback, useSyncExternalStore } from "react";
import { DEFAULT_KEYS, keysText, parseKeys, type KeyTable } from "@/lib/desk/keys";

const KEYS_AT = "merestone-desk-keys";
const SIDE_AT = "merestone-desk-side";

const listeners = new Set<() => void>();
const subscribe = (listener: () => void) => {
  listeners.add(listener);
  window.addEventListener("storage", listener);
  return () => {
    listeners.delete(listener);
    window.removeEventListener("storage", listener);
  };
};

function read(name: string): string | null {
  try {
    return localStorage.getItem(name);
  } catch {
    return null; // storage is switched off: the defaults hold
  }
}

function write(name: string, text: string): void {
  try {
    localStorage.setItem(name, text);
  } catch {
    // Storage is switched off: the choice cannot outlive the page, and is not made.
  }
  for (const listener of listeners) listener();
}

let parsed: { text: string | null; keys: KeyTable } = { text: null, keys: DEFAULT_KEYS };

function currentKeys(): KeyTable {
  const text = read(KEYS_AT);
  if (text !== parsed.text) parsed = { text, keys: parseKeys(text) };
  return parsed.keys;
}

export type Side = "left" | "right";

/** A person's own keys and the side of the key panel, kept in this browser. */
export function usePreferences() {
  const keys = useSyncExternalStore(subscribe, currentKeys, () => DEFAULT_KEYS);
  const side = useSyncExternalStore<Side>(
    subscribe,
    () => (read(SIDE_AT) === "left" ? "left" : "right"),
    () => "right",
  );
  const setKeys = useCallback((next: KeyTable) => write(KEYS_AT, keysText(next)), []);
  const setSide = useCallback((next: Side) => write(SIDE_AT, next), []);
  return { keys, setKeys, side, setSide };
}
