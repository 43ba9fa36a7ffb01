import { createRoot } from "react-dom/client";
import { Toaster } from "sonner";
import { Desk } from "@/components/desk/Desk";
import type { DeskServices } from "@/components/desk/services";
import type { DeskDocument, DeskInstance, DeskTask } from "@/lib/contracts/desk";
import type { Point } from "@/lib/geometry/types";
import "@/app/globals.css";

/** What a test can set before the page runs, and read after. */
declare global {
  interface Window {
    deskTask?: Partial<DeskTask>;
    /** How many polygons of how many vertices lie on the desk at the start. */
    crowd?: { shapes: number; vertices: number };
    saved: DeskDocument[];
    handedIn: DeskDocument[];
    /** What the server answers to a save: a status, 0 for no network. */
    saveFails?: number | undefined;
  }
}

window.saved = [];
window.handedIn = [];

function crowd({ shapes, vertices }: { shapes: number; vertices: number }, width: number, height: number) {
  const across = Math.ceil(Math.sqrt((shapes * width) / height));
  const cell = width / across;
  return Array.from({ length: shapes }, (_, i): DeskInstance => {
    const [cx, cy] = [((i % across) + 0.5) * cell, (Math.floor(i / across) + 0.5) * cell];
    const ring = Array.from({ length: vertices }, (_unused, v): Point => {
      const angle = (2 * Math.PI * v) / vertices;
      const radius = cell * (0.34 + 0.08 * Math.sin(5 * angle + i));
      return [cx + radius * Math.cos(angle), cy + radius * Math.sin(angle)];
    });
    return {
      id: `c${i}`,
      classId: ["bottle", "can", "rope"][i % 3] ?? "bottle",
      shape: { kind: "polygon", rings: [ring] },
      origin: "drawn",
      proposalId: null,
      crowd: false,
      occluded: false,
      truncated: false,
      note: "",
    };
  });
}

const size = { width: window.deskTask?.width ?? 384, height: window.deskTask?.height ?? 303 };
const task: DeskTask = {
  claimId: "clm_harness",
  batchTitle: "Wrack line, spring tide",
  imageName: "shore-014.jpg",
  imageUrl: "/picture.png",
  ...size,
  classes: [
    { id: "bottle", number: 1, name: "Bottle", colour: "#0072b2", geometry: "polygon" },
    { id: "can", number: 2, name: "Can", colour: "#e69f00", geometry: "polygon" },
    { id: "rope", number: 3, name: "Rope", colour: "#009e73", geometry: "polygon" },
    { id: "float", number: 4, name: "Net float", colour: "#cc79a7", geometry: "box" },
  ],
  proposals: [],
  dealing: { adjustedShare: 0, firstFew: 0 },
  brief: {
    version: 2,
    markdown: "Outline **every** piece of litter.\n\n- Leave weed and pebbles.",
    examples: [],
  },
  pay: { baseCents: 4, boxCents: 2, polygonCents: 6, capCents: 90 },
  medianSeconds: 74,
  expiresAtMs: Date.now() + 20 * 60_000,
  draft: window.crowd
    ? { instances: crowd(window.crowd, size.width, size.height), dismissedProposalIds: [] }
    : null,
  draftVersion: 0,
  sensitive: false,
  ...window.deskTask,
};

const services: DeskServices = {
  saveDraft: async (document, version) => {
    if (window.saveFails !== undefined)
      throw Object.assign(new Error("refused"), { status: window.saveFails });
    window.saved.push(document);
    return { version: version + 1 };
  },
  heartbeat: async () => ({ expiresAtMs: Date.now() + 20 * 60_000 }),
  submit: async ({ document }) => void window.handedIn.push(document),
  release: async () => undefined,
};

const root = document.getElementById("root");
if (root)
  createRoot(root).render(
    <>
      <Desk task={task} mode="annotate" services={services} />
      <Toaster />
    </>,
  );
