"use client";

import { ArrowDown, ArrowUp, Plus, Trash2 } from "lucide-react";
import { useRouter } from "next/navigation";
import { useState, useTransition } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { Checkbox } from "@/components/ui/Checkbox";
import { classColour, classPattern } from "@/components/ui/classPalette";
import { ClassSwatch } from "@/components/ui/ClassSwatch";
import { Markdown } from "@/components/ui/Markdown";
import { Notice } from "@/components/ui/Notice";
import { Select } from "@/components/ui/Select";
import { Sheet } from "@/components/ui/Sheet";
import { Tabs } from "@/components/ui/Tabs";
import { TextArea } from "@/components/ui/TextArea";
import { TextInput } from "@/components/ui/TextInput";
import { suggestLabel, type EverydayLabel } from "@/lib/proposals/everydayLabels";
import { saveKey } from "../../../actions";

type ClassDraft = {
  id: string | null;
  number: number;
  name: string;
  colour: string;
  pattern: string;
  geometry: "box" | "polygon";
  /** What the detector of everyday things calls it, once that is confirmed. */
  detectorLabel: EverydayLabel | null;
};
type Example = { imageId: string; caption: string };
type Batch = {
  id: string;
  title: string;
  isDraft: boolean;
  version: number;
  brief: string;
  sensitive: boolean;
  sensitiveNote: string;
  safetyCritical: boolean;
  classes: ClassDraft[];
  examples: Example[];
};

const BRIEF_START = `## What to draw

Every object of a class in the key, also if it is partly hidden or cut by the edge.

## What to leave out

- Reflections, shadows and printed pictures of objects.
- What is too small or too blurred to name.

## How exact

Follow the visible edge. Where one object lies on another, draw only what you can see.
`;

function freshClass(number: number): ClassDraft {
  return {
    id: null,
    number,
    name: "",
    colour: classColour(number).hex,
    pattern: classPattern(number),
    geometry: "polygon",
    detectorLabel: null,
  };
}

/** Step two: the key, the brief with example pictures, and the cautions that annotators see first. */
export function KeyStep({ batch, images }: { batch: Batch; images: { id: string; fileName: string }[] }) {
  const router = useRouter();
  const [pending, startTransition] = useTransition();
  const [problem, setProblem] = useState<{ message: string; fields: Record<string, string> } | null>(null);
  const [title, setTitle] = useState(batch.title);
  const [classes, setClasses] = useState(batch.classes.length > 0 ? batch.classes : [freshClass(1)]);
  const [brief, setBrief] = useState(batch.brief || BRIEF_START);
  const [examples, setExamples] = useState(batch.examples);
  const [sensitive, setSensitive] = useState(batch.sensitive);
  const [sensitiveNote, setSensitiveNote] = useState(batch.sensitiveNote);
  const [safetyCritical, setSafetyCritical] = useState(batch.safetyCritical);
  const field = (path: string) => problem?.fields[path];

  function save(goOn: boolean): void {
    setProblem(null);
    startTransition(async () => {
      const answer = await saveKey(null, {
        batchId: batch.id,
        title,
        classes,
        brief,
        examples,
        sensitive,
        sensitiveNote,
        safetyCritical,
        versionSeen: batch.version,
      });
      if (!answer.ok) return setProblem(answer);
      toast.success("Key and brief are saved.");
      if (goOn) router.push(`/batches/${batch.id}/setup/pay`);
      router.refresh();
    });
  }

  const change = (index: number, part: Partial<ClassDraft>) =>
    setClasses(classes.map((entry, at) => (at === index ? { ...entry, ...part } : entry)));
  const renumber = (list: ClassDraft[]) =>
    list.map((entry, at) => ({
      ...entry,
      number: at + 1,
      colour: classColour(at + 1).hex,
      pattern: classPattern(at + 1),
    }));
  const move = (index: number, by: -1 | 1) => {
    const next = [...classes];
    const [taken] = next.splice(index, 1);
    if (taken) next.splice(index + by, 0, taken);
    setClasses(renumber(next));
  };

  return (
    <div className="grid gap-6">
      {problem ? (
        <Notice kind="danger" live>
          {problem.message}
        </Notice>
      ) : null}
      <Sheet>
        <TextInput
          label="Title"
          value={title}
          maxLength={120}
          error={field("title")}
          onChange={(event) => setTitle(event.currentTarget.value)}
        />
      </Sheet>
      <Sheet
        title="The key"
        lead={
          batch.isDraft
            ? "What is to be found, with number, colour and geometry. The numbers are keys on the desk."
            : "The key is fixed since the batch was funded."
        }
      >
        <ul className="grid gap-4" aria-label="Classes">
          {classes.map((entry, index) => (
            <li
              key={entry.id ?? `new-${index}`}
              className="border-line grid items-end gap-3 border-b pb-4 sm:grid-cols-[auto_1fr_12rem_auto]"
            >
              <ClassSwatch number={entry.number} colour={entry.colour} className="mb-2" />
              <TextInput
                label={`Name of class ${entry.number}`}
                value={entry.name}
                maxLength={60}
                disabled={!batch.isDraft}
                error={field(`classes/${index}/name`)}
                onChange={(event) => {
                  const name = event.currentTarget.value;
                  // A confirmed match is of the name that it was confirmed for.
                  const isSame = suggestLabel(name) === entry.detectorLabel;
                  change(index, { name, detectorLabel: isSame ? entry.detectorLabel : null });
                }}
              />
              <Select
                label="Drawn as"
                value={entry.geometry}
                disabled={!batch.isDraft}
                onChange={(event) =>
                  change(index, { geometry: event.currentTarget.value === "box" ? "box" : "polygon" })
                }
                options={[
                  { value: "polygon", label: "Outline (polygon)" },
                  { value: "box", label: "Box" },
                ]}
              />
              {batch.isDraft ? (
                <span className="flex gap-1 pb-1">
                  <IconButton
                    label={`Move ${entry.name || `class ${entry.number}`} up`}
                    disabled={index === 0}
                    onClick={() => move(index, -1)}
                    icon={<ArrowUp aria-hidden className="size-4" />}
                  />
                  <IconButton
                    label={`Move ${entry.name || `class ${entry.number}`} down`}
                    disabled={index === classes.length - 1}
                    onClick={() => move(index, 1)}
                    icon={<ArrowDown aria-hidden className="size-4" />}
                  />
                  <IconButton
                    label={`Remove ${entry.name || `class ${entry.number}`}`}
                    disabled={classes.length === 1}
                    onClick={() => setClasses(renumber(classes.filter((_, at) => at !== index)))}
                    icon={<Trash2 aria-hidden className="size-4" />}
                  />
                </span>
              ) : null}
              <KnownClass
                entry={entry}
                disabled={!batch.isDraft}
                onChange={(detectorLabel) => change(index, { detectorLabel })}
              />
            </li>
          ))}
        </ul>
        {batch.isDraft && classes.length < 40 ? (
          <Button
            className="mt-4"
            icon={<Plus aria-hidden className="size-4" />}
            onClick={() => setClasses([...classes, freshClass(classes.length + 1)])}
          >
            Add a class
          </Button>
        ) : null}
      </Sheet>
      <Sheet
        title="The brief"
        lead="What counts and what does not. Work is judged by the version that was shown when it was claimed."
      >
        <Tabs
          label="Brief"
          tabs={[
            {
              value: "write",
              label: "Write",
              panel: (
                <TextArea
                  label="Brief, in Markdown"
                  rows={14}
                  value={brief}
                  maxLength={20_000}
                  error={field("brief")}
                  onChange={(event) => setBrief(event.currentTarget.value)}
                  className="font-figures"
                />
              ),
            },
            { value: "read", label: "As annotators read it", panel: <Markdown>{brief}</Markdown> },
          ]}
        />
        <h3 className="mt-6 mb-2 text-lg font-semibold">Example pictures</h3>
        {images.length === 0 ? (
          <p className="text-muted">Upload pictures first; then choose some of them as examples.</p>
        ) : null}
        <ul className="grid gap-3 sm:grid-cols-2" aria-label="Example pictures">
          {examples.map((example, index) => (
            <li key={example.imageId} className="flex items-end gap-3">
              <img
                src={`/api/images/${example.imageId}/thumb`}
                alt=""
                className="bg-sunk aspect-4/3 w-24 object-cover"
              />
              <TextInput
                label={`Caption of example ${index + 1}`}
                className="grow"
                value={example.caption}
                maxLength={200}
                onChange={(event) =>
                  setExamples(
                    examples.map((other, at) =>
                      at === index ? { ...other, caption: event.currentTarget.value } : other,
                    ),
                  )
                }
              />
              <IconButton
                label={`Remove example ${index + 1}`}
                onClick={() => setExamples(examples.filter((_, at) => at !== index))}
                icon={<Trash2 aria-hidden className="size-4" />}
              />
            </li>
          ))}
        </ul>
        {images.length > examples.length && examples.length < 12 ? (
          <Select
            className="mt-3 max-w-sm"
            label="Add an example"
            value=""
            placeholder="Choose a picture"
            options={images
              .filter((image) => !examples.some((example) => example.imageId === image.id))
              .map((image) => ({ value: image.id, label: image.fileName }))}
            onChange={(event) =>
              setExamples([...examples, { imageId: event.currentTarget.value, caption: "" }])
            }
          />
        ) : null}
      </Sheet>
      <Sheet title="Cautions">
        <div className="grid gap-4">
          <Checkbox
            label="Sensitive content"
            hint="People, private places or distressing scenes. Only annotators who opted in see the batch, and they are told before the first picture. Consent and privacy law are local: check yours."
            checked={sensitive}
            onChange={(event) => setSensitive(event.currentTarget.checked)}
          />
          {sensitive ? (
            <TextInput
              label="What annotators will see"
              value={sensitiveNote}
              maxLength={300}
              onChange={(event) => setSensitiveNote(event.currentTarget.value)}
            />
          ) : null}
          <Checkbox
            label="Feeds a safety-critical system"
            hint="Driving, medicine, guarding of machines. Such labels need review by people qualified in that field: agreement between annotators is not proof of correctness. The release says so."
            checked={safetyCritical}
            onChange={(event) => setSafetyCritical(event.currentTarget.checked)}
          />
        </div>
      </Sheet>
      <div className="flex flex-wrap justify-end gap-3">
        <Button pending={pending} onClick={() => save(false)}>
          Save
        </Button>
        {batch.isDraft ? (
          <Button kind="primary" pending={pending} onClick={() => save(true)}>
            Save and go on
          </Button>
        ) : null}
      </div>
    </div>
  );
}

/** Offers the detector of everyday things for a class whose name it probably knows. */
function KnownClass({
  entry,
  disabled,
  onChange,
}: {
  entry: ClassDraft;
  disabled: boolean;
  onChange: (label: EverydayLabel | null) => void;
}) {
  const label = entry.detectorLabel ?? suggestLabel(entry.name);
  if (!label) return null;
  return (
    <Checkbox
      className="sm:col-span-full sm:ms-10"
      label={`“${entry.name.trim()}” is what the everyday detector calls “${label}”`}
      hint="Confirm it if your pictures are everyday photographs: proposals of this class then come with its name. It is switched off by itself where it does not help on settled pictures."
      checked={entry.detectorLabel !== null}
      disabled={disabled}
      onChange={(event) => onChange(event.currentTarget.checked ? label : null)}
    />
  );
}

function IconButton({
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
      disabled={disabled}
      onClick={onClick}
      className="hover:bg-ink/8 rounded-sheet grid size-9 place-items-center disabled:opacity-40"
    >
      {icon}
    </button>
  );
}
