"use client";

import { useEffect, useState, useSyncExternalStore } from "react";
import { DraftKeeper } from "./draftKeeper";
import type { DeskServices } from "./services";

/** The keeper of a claim's drawing for the life of the page, with its state; saves when the page is left. */
export function useDraft(claimId: string, firstVersion: number, services: DeskServices) {
  const [keeper] = useState(() => new DraftKeeper(claimId, firstVersion, services.saveDraft));
  const state = useSyncExternalStore(keeper.subscribe, keeper.getState, keeper.getState);
  useEffect(() => {
    const online = () => void keeper.flush();
    const hide = () => {
      if (document.visibilityState === "hidden") void keeper.flush();
    };
    const leave = (event: BeforeUnloadEvent) => {
      if (keeper.hasUnsaved) event.preventDefault();
    };
    window.addEventListener("online", online);
    window.addEventListener("beforeunload", leave);
    document.addEventListener("visibilitychange", hide);
    return () => {
      window.removeEventListener("online", online);
      window.removeEventListener("beforeunload", leave);
      document.removeEventListener("visibilitychange", hide);
      void keeper.flush();
    };
  }, [keeper]);
  return { keeper, state };
}
