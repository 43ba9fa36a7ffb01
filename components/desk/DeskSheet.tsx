"use client";

import { CircleHelp, Redo2, Undo2, ZoomIn, ZoomOut, Scan, ScrollText } from "lucide-react";
import { memo, useCallback, useEffect, useMemo, useRef, useState } from "react";
import { toast } from "sonner";
import { formatDuration } from "@/components/ui/Figures";
import { Button } from "@/components/ui/Button";
import { cn } from "@/components/ui/cn";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Dialog } from "@/components/ui/Dialog";
import { Markdown } from "@/components/ui/Markdown";
import { Money } from "@/components/ui/Money";
import { Notice } from "@/components/ui/Notice";
import { StateMark } from "@/components/ui/StateMark";
import type { DeskDocument, DeskTask } from "@/lib/contracts/desk";
import { DeskController } from "@/lib/desk/controller";
import type { ScreenPoint } from "@/lib/desk/viewport";
import { HelpSheet } from "./HelpSheet";
import { KeyLegend } from "./KeyLegend";
import { useOutline } from "./useOutline";
import { SelectedPanel } from "./SelectedPanel";
import type { DeskMode, DeskServices } from "./services";
import { Minimap } from "./Minimap";
import { Stage } from "./Stage";
import { StageCaption, ThumbBar } from "./StageCaption";
import { Tray } from "./Tray";
import { useActivity } from "./useActivity";
import type { SaveState } from "./draftKeeper";
import { useScene, useSketch } from "./useDeskScene";
import { useDraft } from "./useDraft";
import { useKeys } from "./useKeys";
import { useLease } from "./useLease";
import { usePreferences } from "./usePreferences";
import { PLAIN_LOOK, ViewPanel } from "./ViewPanel";

type Props = {
  task: DeskTask;
  /** Whether the task's drawing is ahead of the server's and still has to be saved there. */
  isAhead: boolean;
  mode: DeskMode;
  services: DeskServices;
};

const newId = () => `s${crypto.randomUUID().replaceAll("-", "").slice(0, 20)}`;

/** The laid-out desk: the sheet in the middle, the key at its side, the tray at its foot. */
export function DeskSheet({ task, isAhead, mode, services }: Props) {
  const draft = useDraft(task.claimId, task.draftVersion, services);
  const [controller] = useState(
    () => new DeskController({ task, newId, onChange: (document) => draft.keeper.put(document) }),
  );
  const scene = useScene(controller);
  const preferences = usePreferences();
  const activity = useActivity();
  const lease = useLease(task.expiresAtMs, services, { mode, idleMs: activity.idleMs });
  const screenCursor = useRef<ScreenPoint | null>(null);
  const [look, setLook] = useState(PLAIN_LOOK);
  const [helpOpen, setHelpOpen] = useState(false);
  const [briefOpen, setBriefOpen] = useState(false);
  const [handInOpen, setHandInOpen] = useState(false);
  const outline = useOutline(task, controller);
  useEffect(() => controller.setOutliner(outline), [controller, outline]);
  useEffect(() => controller.setKeys(preferences.keys), [controller, preferences.keys]);
  useEffect(() => {
    if (isAhead && task.draft) draft.keeper.put(task.draft);
  }, [isAhead, task.draft, draft.keeper]);
  const isPanning = useKeys(controller, {
    keys: preferences.keys,
    cursor: screenCursor,
    onHelp: () => setHelpOpen(true),
    onBrief: () => setBriefOpen(true),
    onHandIn: () => setHandInOpen(true),
    onOutline: outline.run,
    onCancel: () => (outline.isRunning ? outline.stop() : controller.cancel()),
  });
  const onScreenCursor = useCallback((at: ScreenPoint | null) => {
    screenCursor.current = at;
  }, []);
  const selected = controller.find(scene.selectedId);
  const selectedKind = task.classes.find((kind) => kind.id === selected?.classId);
  const summary = useMemo(() => summarise(task, scene.document), [task, scene.document]);
  useTwoTabs(task.claimId);

  const handIn = useCallback(async (): Promise<string | undefined> => {
    try {
      await services.submit({
        document: controller.document,
        activeSeconds: Math.max(1, activity.activeSeconds()),
      });
      if (mode === "annotate") draft.keeper.forget();
      return undefined;
    } catch (error) {
      return error instanceof Error ? error.message : "That did not work. Your drawing is kept.";
    }
  }, [services, controller, activity, draft, mode]);

  return (
    <div className="bg-paper text-ink flex h-dvh flex-col overflow-hidden">
      <header className="border-line flex flex-wrap items-center gap-x-5 gap-y-1 border-b px-3 py-1.5 sm:px-4">
        <div className="min-w-0 grow basis-40">
          <h1 className="font-heading truncate text-base leading-tight font-semibold">{task.imageName}</h1>
          <p className="text-muted truncate text-sm leading-[1.125rem]">{task.batchTitle}</p>
        </div>
        {mode === "annotate" ? (
          <TaskFigures task={task} seconds={activity.seconds} expectedCents={summary.expectedCents} />
        ) : (
          <StateMark state="disputed">redrawing a dispute</StateMark>
        )}
        <SaveMark state={draft.state} />
        <div className="flex items-center gap-1.5">
          <Button
            size="small"
            icon={<ScrollText aria-hidden className="size-4" />}
            onClick={() => setBriefOpen(true)}
          >
            Brief
          </Button>
          <ConfirmDialog
            title={mode === "annotate" ? "Give this picture back?" : "Leave without a decision?"}
            consequence={
              mode === "annotate"
                ? "Somebody else can draw it, and what you drew is dropped. It does not count against you."
                : "The dispute stays on the docket. What you drew is kept in this browser."
            }
            confirmLabel={mode === "annotate" ? "Give it back" : "Leave"}
            trigger={<Button size="small">{mode === "annotate" ? "Give back" : "Leave"}</Button>}
            onConfirm={async () => {
              if (mode === "annotate") draft.keeper.forget();
              await services.release();
            }}
          />
          <Button size="small" kind="primary" onClick={() => setHandInOpen(true)}>
            {mode === "annotate" ? "Hand in" : "Use as decision"}
          </Button>
        </div>
      </header>

      {draft.state === "conflict" ? (
        <Notice
          kind="danger"
          live
          action={
            <Button size="small" onClick={() => window.location.reload()}>
              Reload
            </Button>
          }
        >
          This picture was changed in another tab or on another device. Reload to go on with the newest
          drawing.
        </Notice>
      ) : null}
      {draft.state === "signed-out" ? (
        <Notice
          kind="danger"
          live
          action={
            <Button size="small" onClick={() => window.open("/sign-in", "_blank", "noopener")}>
              Sign in
            </Button>
          }
        >
          You are signed out. Sign in in a new tab and go on here: nothing is lost, and it is saved by itself.
        </Notice>
      ) : null}
      {draft.state === "lost" || lease.state === "lost" ? (
        <Notice kind="danger" live>
          Your claim ended and somebody else has the place. Your drawing is kept in this browser.
        </Notice>
      ) : null}
      {lease.state === "soon" ? (
        <Notice kind="caution" live>
          Your claim runs out at {lease.expiresAt}. Go on drawing to keep it.
        </Notice>
      ) : null}
      {activity.restDue ? (
        <Notice
          kind="caution"
          live
          action={
            <Button size="small" onClick={activity.dismissRest}>
              Go on
            </Button>
          }
        >
          Fifty minutes without a break. Look into the distance and stretch your hands; the picture waits.
        </Notice>
      ) : null}

      <div
        className={cn(
          "grid min-h-0 grow grid-rows-[1fr_auto] md:grid-rows-1",
          preferences.side === "left" ? "md:grid-cols-[17rem_1fr]" : "md:grid-cols-[1fr_17rem]",
        )}
      >
        <main className="relative min-h-0 p-2 sm:p-3" id="content">
          <div className="border-ink relative size-full border">
            <Stage
              controller={controller}
              task={task}
              look={look}
              isPanning={isPanning}
              onScreenCursor={onScreenCursor}
            />
            <SheetCorner controller={controller} />
            <Minimap controller={controller} task={task} />
            <div className="absolute end-2 bottom-2 flex flex-col gap-1">
              <CornerButton
                label="Zoom in"
                onClick={() => controller.zoomCentre(1.4)}
                icon={<ZoomIn aria-hidden className="size-4" />}
              />
              <CornerButton
                label="Zoom out"
                onClick={() => controller.zoomCentre(1 / 1.4)}
                icon={<ZoomOut aria-hidden className="size-4" />}
              />
              <CornerButton
                label="Whole picture"
                onClick={() => controller.fit()}
                icon={<Scan aria-hidden className="size-4" />}
              />
              <CornerButton
                label="Undo"
                disabled={!scene.canUndo}
                onClick={() => controller.undo()}
                icon={<Undo2 aria-hidden className="size-4" />}
              />
              <CornerButton
                label="Redo"
                disabled={!scene.canRedo}
                onClick={() => controller.redo()}
                icon={<Redo2 aria-hidden className="size-4" />}
              />
              <CornerButton
                label="Keys and help"
                onClick={() => setHelpOpen(true)}
                icon={<CircleHelp aria-hidden className="size-4" />}
              />
            </div>
            <StageCaption controller={controller} scene={scene} keys={preferences.keys} />
          </div>
        </main>
        <aside
          className={cn(
            "border-line relative h-[28dvh] max-h-[34dvh] min-h-0 overflow-y-auto border-t px-3 py-2 md:h-auto md:max-h-none md:border-t-0 md:py-3",
            preferences.side === "left" ? "md:order-first md:border-e" : "md:border-s",
          )}
          aria-label="Key and selection"
        >
          <ThumbBar controller={controller} scene={scene} keys={preferences.keys} />
          <KeyLegend
            controller={controller}
            document={scene.document}
            classes={task.classes}
            currentClassId={scene.currentClassId}
            hiddenClassIds={scene.hiddenClassIds}
          />
          <SelectedPanel
            controller={controller}
            instance={selected}
            kind={selectedKind}
            intent={scene.intent?.kind ?? null}
            keys={preferences.keys}
            outline={outline}
          />
          <ViewPanel look={look} onChange={setLook} />
        </aside>
      </div>
      <Tray
        controller={controller}
        dealt={scene.dealt}
        dealtIndex={scene.dealtIndex}
        task={task}
        keys={preferences.keys}
      />
      <p aria-live="polite" className="sr-only">
        {scene.message}
      </p>

      <HelpSheet open={helpOpen} onOpenChange={setHelpOpen} preferences={preferences} />
      <Dialog
        title={`Brief, version ${task.brief.version}`}
        open={briefOpen}
        onOpenChange={setBriefOpen}
        size="wide"
      >
        <Markdown>{task.brief.markdown}</Markdown>
        <ul className="mt-4 grid gap-4 sm:grid-cols-2">
          {task.brief.examples.map((example) => (
            <li key={example.url}>
              <img src={example.url} alt="" className="w-full" />
              <p className="text-muted mt-1 text-sm">{example.caption}</p>
            </li>
          ))}
        </ul>
      </Dialog>
      <ConfirmDialog
        title={mode === "annotate" ? "Hand this picture in?" : "Use this as the decision?"}
        open={handInOpen}
        onOpenChange={setHandInOpen}
        confirmLabel={mode === "annotate" ? "Hand in" : "Go on to the reason"}
        consequence={
          <>
            <p>
              {summary.total === 0
                ? "You drew nothing: that says there is no object of the key in this picture."
                : `${summary.total} ${summary.total === 1 ? "object" : "objects"}: ${summary.words}.`}
            </p>
            {mode === "annotate" ? (
              <p className="mt-2">
                If all of it is agreed, you earn <Money cents={summary.expectedCents} />. You see your score
                with its reasons when the others have drawn it.
              </p>
            ) : null}
          </>
        }
        onConfirm={async () => {
          const boxes = summary.boxesToOutline;
          if (boxes.length > 0) {
            await outline.outlineBoxes(boxes, { standIn: true });
            controller.select(boxes[0] ?? null);
            return boxes.length === 1
              ? "One box was in a class that wants an outline, and was outlined just now. Look at it, then hand in."
              : `${boxes.length} boxes were in classes that want outlines, and were outlined just now. Look at them, then hand in.`;
          }
          await draft.keeper.flush();
          return handIn();
        }}
      />
    </div>
  );
}

function TaskFigures({
  task,
  seconds,
  expectedCents,
}: {
  task: DeskTask;
  seconds: number;
  expectedCents: number;
}) {
  const clock = `${Math.floor(seconds / 60)}:${String(seconds % 60).padStart(2, "0")}`;
  return (
    <dl className="font-figures flex gap-x-4 text-sm">
      <div>
        <dt className="text-muted font-text text-xs">If all agrees</dt>
        <dd>
          <Money cents={expectedCents} />
        </dd>
      </div>
      <div>
        <dt className="text-muted font-text text-xs">
          Time{task.medianSeconds === null ? "" : `, median ${formatDuration(task.medianSeconds * 1000)}`}
        </dt>
        <dd>{clock}</dd>
      </div>
    </dl>
  );
}

const SAVE_WORD: Record<SaveState, { state: "agreed" | "waits" | "disputed"; word: string }> = {
  saved: { state: "agreed", word: "saved" },
  saving: { state: "waits", word: "saving" },
  "signed-out": { state: "disputed", word: "signed out, kept here" },
  offline: { state: "waits", word: "kept here, network away" },
  conflict: { state: "disputed", word: "changed elsewhere" },
  lost: { state: "disputed", word: "claim ended" },
};

function SaveMark({ state }: { state: SaveState }) {
  return (
    <span data-save={state}>
      <StateMark state={SAVE_WORD[state].state}>{SAVE_WORD[state].word}</StateMark>
    </span>
  );
}

const SheetCorner = memo(function SheetCorner({ controller }: { controller: DeskController }) {
  const { viewport, cursor } = useSketch(controller);
  return (
    <p
      aria-hidden
      className="bg-paper/92 font-figures pointer-events-none absolute start-2 bottom-2 px-1.5 py-0.5 text-xs"
    >
      {Math.round(viewport.scale * 100)} %
      {cursor ? ` · ${Math.round(cursor[0])}, ${Math.round(cursor[1])}` : ""}
    </p>
  );
});

function CornerButton({
  label,
  icon,
  onClick,
  disabled = false,
}: {
  label: string;
  icon: React.ReactNode;
  onClick: () => void;
  disabled?: boolean;
}) {
  return (
    <button
      type="button"
      aria-label={label}
      title={label}
      disabled={disabled}
      onClick={onClick}
      className="bg-paper border-rule hover:border-ink rounded-sheet grid size-9 place-items-center border disabled:opacity-50"
    >
      {icon}
    </button>
  );
}

/** What is handed in, in words, and what it earns if all of it agrees. */
function summarise(task: DeskTask, document: DeskDocument) {
  const geometryOf = new Map(task.classes.map((kind) => [kind.id, kind.geometry]));
  const count = (origin: string) =>
    document.instances.filter((instance) => instance.origin === origin).length;
  const outlines = document.instances.filter((instance) => geometryOf.get(instance.classId) === "polygon");
  const boxes = document.instances.length - outlines.length;
  const { baseCents, boxCents, polygonCents, capCents } = task.pay;
  const parts = [
    [count("drawn"), "drawn"],
    [count("taken"), "taken as dealt"],
    [count("adjusted"), "adjusted"],
  ] as const;
  return {
    total: document.instances.length,
    words: parts
      .filter(([number]) => number > 0)
      .map(([number, word]) => `${number} ${word}`)
      .join(", "),
    expectedCents: Math.min(capCents, baseCents + boxes * boxCents + outlines.length * polygonCents),
    boxesToOutline: outlines
      .filter((instance) => instance.shape.kind === "box")
      .map((instance) => instance.id),
  };
}

/** Tells when the same picture is open in another tab of this browser. */
function useTwoTabs(claimId: string): void {
  useEffect(() => {
    if (typeof BroadcastChannel === "undefined") return;
    const channel = new BroadcastChannel(`merestone-desk-${claimId}`);
    const warn = () => toast.warning("This picture is open in another tab too. Draw in one of them only.");
    channel.onmessage = (event: MessageEvent<string>) => {
      if (event.data === "here?") channel.postMessage("here");
      warn();
    };
    channel.postMessage("here?");
    return () => channel.close();
  }, [claimId]);
}
