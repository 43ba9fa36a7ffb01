"use client";

import { Moon, Sun } from "lucide-react";
import { useSyncExternalStore } from "react";
import { THEME_KEY, type Theme } from "./theme";

const DARK_QUERY = "(prefers-color-scheme: dark)";

/** Turns the sheet from day to night and keeps the choice on this device. */
export function ThemeToggle() {
  const theme = useSyncExternalStore(subscribe, currentTheme, unknownTheme);
  const isDark = theme === "dark";
  return (
    <button
      type="button"
      onClick={() => choose(isDark ? "light" : "dark")}
      aria-label={isDark ? "Light theme" : "Dark theme"}
      className="rounded-sheet hover:bg-ink/8 grid size-11 place-items-center"
    >
      {theme === undefined ? null : isDark ? (
        <Sun aria-hidden className="size-5" />
      ) : (
        <Moon aria-hidden className="size-5" />
      )}
    </button>
  );
}

function choose(theme: Theme): void {
  document.documentElement.dataset["theme"] = theme;
  try {
    localStorage.setItem(THEME_KEY, theme);
  } catch {
    // Storage may be forbidden; the choice then lasts as long as the page.
  }
}

function currentTheme(): Theme | undefined {
  const chosen = document.documentElement.dataset["theme"];
  if (chosen === "light" || chosen === "dark") return chosen;
  return matchMedia(DARK_QUERY).matches ? "dark" : "light";
}

const unknownTheme = (): Theme | undefined => undefined;

function subscribe(onChange: () => void): () => void {
  const media = matchMedia(DARK_QUERY);
  const observer = new MutationObserver(onChange);
  observer.observe(document.documentElement, { attributeFilter: ["data-theme"] });
  media.addEventListener("change", onChange);
  // Another tab of the same person may have turned the sheet.
  const onStorage = (event: StorageEvent) => {
    if (event.key === THEME_KEY && (event.newValue === "light" || event.newValue === "dark"))
      document.documentElement.dataset["theme"] = event.newValue;
  };
  addEventListener("storage", onStorage);
  return () => {
    observer.disconnect();
    media.removeEventListener("change", onChange);
    removeEventListener("storage", onStorage);
  };
}
