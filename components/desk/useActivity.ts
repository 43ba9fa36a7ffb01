"use client";

import { useCallback, useEffect, useRef, useState } from "react";

/** Without a sign of the hand for this long, time no longer counts. */
const IDLE_AFTER_MS = 30_000;
/** After so much work without a pause of five minutes the desk reminds of rest. */
const REST_AFTER_MS = 50 * 60_000;

/** Seconds of active work on the page, and whether a rest is due. */
export function useActivity() {
  const lastSign = useRef(0);
  const activeMs = useRef(0);
  const [seconds, setSeconds] = useState(0);
  const [restDue, setRestDue] = useState(false);
  useEffect(() => {
    lastSign.current = Date.now();
    let unbrokenMs = 0;
    const sign = () => (lastSign.current = Date.now());
    const tick = setInterval(() => {
      const idleMs = Date.now() - lastSign.current;
      if (idleMs < IDLE_AFTER_MS && document.visibilityState === "visible") {
        activeMs.current += 1000;
        unbrokenMs += 1000;
        setSeconds(Math.round(activeMs.current / 1000));
      } else if (idleMs > 5 * 60_000) {
        unbrokenMs = 0;
        setRestDue(false);
      }
      if (unbrokenMs > REST_AFTER_MS) setRestDue(true);
    }, 1000);
    const events = ["pointermove", "pointerdown", "keydown", "wheel"] as const;
    for (const event of events) window.addEventListener(event, sign, { passive: true });
    return () => {
      clearInterval(tick);
      for (const event of events) window.removeEventListener(event, sign);
    };
  }, []);
  const idleMs = useCallback(() => Date.now() - lastSign.current, []);
  return {
    idleMs,
    seconds,
    restDue,
    dismissRest: () => setRestDue(false),
    activeSeconds: () => activeMs.current / 1000,
  };
}
