"use client";

import { useEffect, useState } from "react";
import { statusOf, type DeskMode, type DeskServices } from "./services";

const BEAT_EVERY_MS = 60_000;
const SOON_MS = 4 * 60_000;
/** Without a sign of the hand for this long the claim is no longer extended. */
const IDLE_MAX_MS = 5 * 60_000;

/** Extends the claim once a minute while somebody works on the page, and tells when it is about to end. */
export function useLease(
  firstExpiryMs: number,
  services: DeskServices,
  { mode, idleMs }: { mode: DeskMode; idleMs: () => number },
) {
  const [expiresAtMs, setExpiresAtMs] = useState(firstExpiryMs);
  const [isLost, setLost] = useState(false);
  const [isSoon, setSoon] = useState(false);
  useEffect(() => {
    if (mode === "redraw") return;
    const beat = async () => {
      // A page that nobody works on must not hold the place of another annotator.
      if (document.visibilityState !== "visible" || idleMs() > IDLE_MAX_MS) return;
      try {
        setExpiresAtMs((await services.heartbeat()).expiresAtMs);
        setLost(false);
      } catch (error) {
        if (statusOf(error) === 410 || statusOf(error) === 404) setLost(true);
      }
    };
    const timer = setInterval(() => void beat(), BEAT_EVERY_MS);
    document.addEventListener("visibilitychange", beat);
    return () => {
      clearInterval(timer);
      document.removeEventListener("visibilitychange", beat);
    };
  }, [services, mode, idleMs]);
  useEffect(() => {
    const timer = setInterval(() => setSoon(expiresAtMs - Date.now() < SOON_MS), 5000);
    return () => clearInterval(timer);
  }, [expiresAtMs]);
  const expiresAt = new Intl.DateTimeFormat(undefined, { hour: "2-digit", minute: "2-digit" }).format(
    new Date(Math.min(expiresAtMs, 8.64e15)),
  );
  return { state: isLost ? ("lost" as const) : isSoon ? ("soon" as const) : ("held" as const), expiresAt };
}
