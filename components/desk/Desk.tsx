"use client";

import dynamic from "next/dynamic";
import { useEffect, useState } from "react";
import type { DeskTask } from "@/lib/contracts/desk";
import { findKeptDraft, isSequel } from "./draftKeeper";
import type { DeskMode, DeskServices } from "./services";

const DeskSheet = dynamic(() => import("./DeskSheet").then((module) => module.DeskSheet), { ssr: false });

export type DeskProps = { task: DeskTask; mode: DeskMode; services: DeskServices };

/**
 * The desk: one picture, drawn on. Opens with the newest drawing there is: this browser's own, if it was
 * made on top of what the server has, else the server's.
 */
export function Desk({ task, mode, services }: DeskProps) {
  const [ready, setReady] = useState<{ task: DeskTask; isAhead: boolean } | null>(null);
  useEffect(() => {
    let isHere = true;
    void findKeptDraft(task.claimId).then((kept) => {
      if (!isHere) return;
      const isNewer = kept !== undefined && (mode === "redraw" || isSequel(kept, task));
      setReady({ task: isNewer ? { ...task, draft: kept.document } : task, isAhead: isNewer });
    });
    return () => {
      isHere = false;
    };
  }, [task, mode]);
  if (!ready) return <p className="grid h-dvh place-items-center">The desk is being laid out ...</p>;
  return <DeskSheet key={task.claimId} {...ready} mode={mode} services={services} />;
}
