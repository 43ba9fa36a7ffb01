import { mkdtempSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { openCoco } from "@/lib/formats/cocoFile";
import { writeCoco } from "@/lib/formats/coco";
import { FormatError, toDataset, toSource, type Dataset } from "@/lib/formats/dataset";
import { readGeoJson, writeGeoJson } from "@/lib/formats/geojson";
import { INSTANCES_FILE, readMaskPng, writeMaskPng } from "@/lib/formats/maskPng";
import { readVoc, writeVoc } from "@/lib/formats/voc";
import { readWebAnnotation, writeWebAnnotation } from "@/lib/formats/webAnnotation";
import { measureQuality } from "@/lib/quality/measure";

export type FuzzReport = {
  readonly read: number;
  readonly refused: number;
  readonly failures: readonly string[];
  readonly slowestMs: number;
};

type Reader = {
  readonly name: string;
  readonly seed: Uint8Array;
  readonly read: (bytes: Uint8Array) => Dataset;
};

/**
 * Damages good files of every format (bytes flipped, cut, doubled; numbers and words of the format swapped in) and reads
 * them. A reader must give a dataset, on which measuring works, or a FormatError of one line.
 */
export function fuzz({ rounds, seed }: { rounds: number; seed: number }): FuzzReport {
  const folder = mkdtempSync(path.join(tmpdir(), "fuzz-"));
  const readers = readersOf(folder);
  const next = random(seed);
  const failures: string[] = [];
  let read = 0;
  let refused = 0;
  let slowestMs = 0;
  for (let round = 0; round < rounds; round++) {
    const reader = readers[round % readers.length]!;
    const bytes = mutate(reader.seed, next);
    const startedMs = performance.now();
    try {
      judge(reader.read(bytes));
      read++;
    } catch (error) {
      if (error instanceof FormatError && /^[^\r\n]{1,400}$/.test(error.message)) refused++;
      else
        failures.push(
          `${reader.name}, round ${round}: ${error instanceof Error ? (error.stack ?? error.message) : String(error)}`,
        );
    }
    slowestMs = Math.max(slowestMs, performance.now() - startedMs);
  }
  rmSync(folder, { recursive: true });
  return { read, refused, failures, slowestMs };
}

/** What is read must be usable, not only readable. */
function judge({ images, annotations }: Dataset): void {
  const judged = images
    .filter(({ width, height }) => width * height < 1e6)
    .slice(0, 3)
    .map(({ id, width, height }) => {
      const own = annotations.filter(({ imageId }) => imageId === id);
      return { width, height, truth: own, labels: own };
    });
  measureQuality(judged, { bootstrapRounds: 2 });
}

function readersOf(folder: string): Reader[] {
  const example = path.resolve(import.meta.dirname, "example/truth.coco.json");
  const opened = openCoco(example);
  const source = toSource(toDataset(opened));
  opened.close();
  const encode = (chunks: Iterable<string>) => new TextEncoder().encode([...chunks].join(""));
  const decode = (bytes: Uint8Array) => new TextDecoder().decode(bytes);
  const json = (bytes: Uint8Array): unknown => {
    try {
      return JSON.parse(decode(bytes));
    } catch {
      throw new FormatError("", "is not valid JSON");
    }
  };
  const masks = new Map([...writeMaskPng(source)].map((file) => [file.path, file.bytes]));
  const mask = (name: string, read: (bytes: Uint8Array) => Dataset): Reader => ({
    name,
    seed: masks.get(name)!,
    read,
  });
  const png = [...masks.keys()][0]!;
  const fileOf = (name: string) => masks.get(name) ?? new Uint8Array();
  return [
    {
      name: "coco",
      seed: readFileSync(example),
      read: (bytes) => {
        const file = path.join(folder, "fuzz.json");
        writeFileSync(file, bytes);
        const coco = openCoco(file);
        try {
          const dataset = toDataset(coco);
          [...writeCoco(toSource(dataset))].join("");
          return dataset;
        } finally {
          coco.close();
        }
      },
    },
    { name: "geojson", seed: encode(writeGeoJson(source)), read: (bytes) => readGeoJson(json(bytes)) },
    {
      name: "webannotation",
      seed: encode(writeWebAnnotation(source)),
      read: (bytes) => readWebAnnotation(json(bytes)),
    },
    {
      name: "voc",
      seed: [...writeVoc(source)][1]!.bytes,
      read: (bytes) => readVoc([{ path: "a.xml", text: decode(bytes) }]),
    },
    mask(INSTANCES_FILE, (bytes) => readMaskPng(json(bytes), fileOf)),
    mask(png, (bytes) =>
      readMaskPng(json(fileOf(INSTANCES_FILE)), (name) => (name === png ? bytes : fileOf(name))),
    ),
  ];
}

const TOKENS = [
  "-1",
  "0",
  "1e309",
  "1e20",
  "0.5",
  "null",
  "[]",
  "{}",
  '""',
  "NaN",
  "true",
  '"\\u0000"',
  "<",
  "&x;",
  ",",
  "]",
  "}",
  "9007199254740993",
];

function mutate(seed: Uint8Array, next: () => number): Uint8Array {
  let bytes: Uint8Array = Uint8Array.from(seed);
  const edits = 1 + Math.floor(next() * 3);
  for (let k = 0; k < edits && bytes.length > 0; k++) {
    const at = Math.floor(next() * bytes.length);
    const kind = next();
    if (kind < 0.2) bytes[at]! ^= 1 << Math.floor(next() * 8);
    else if (kind < 0.3) bytes = bytes.slice(0, at);
    else if (kind < 0.4)
      bytes = Buffer.concat([bytes.slice(0, at), bytes.slice(Math.max(0, at - 40), at), bytes.slice(at)]);
    else if (kind < 0.5)
      bytes = Buffer.concat([bytes.slice(0, at), bytes.slice(at + Math.floor(next() * 30))]);
    else bytes = swapToken(bytes, at, next);
  }
  return bytes;
}

/** Replaces the number or word at a place by another, so that the file often stays well-formed. */
function swapToken(bytes: Uint8Array, at: number, next: () => number): Uint8Array {
  const isPart = (byte: number | undefined) =>
    byte !== undefined && /[\w.+-]/.test(String.fromCharCode(byte));
  let from = at;
  let to = at;
  while (isPart(bytes[from - 1])) from--;
  while (isPart(bytes[to])) to++;
  const token = TOKENS[Math.floor(next() * TOKENS.length)] ?? "";
  return Buffer.concat([bytes.slice(0, from), new TextEncoder().encode(token), bytes.slice(to)]);
}

function random(seed: number): () => number {
  let state = seed >>> 0;
  return () => {
    state = (state + 0x6d2b79f5) >>> 0;
    let t = Math.imul(state ^ (state >>> 15), state | 1);
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61);
    return ((t ^ (t >>> 14)) >>> 0) / 4_294_967_296;
  };
}

// `tsx tests/support/fuzz.ts [rounds] [seed]` runs any number of them.
if (process.argv[1] !== undefined && path.resolve(process.argv[1]) === import.meta.filename) {
  const rounds = Number(process.argv[2] ?? 10_000);
  const { read, refused, failures, slowestMs } = fuzz({ rounds, seed: Number(process.argv[3] ?? 1) });
  console.log(
    `${rounds} mutated files: ${read} read, ${refused} refused in one line, ${failures.length} failures, slowest ${slowestMs.toFixed(0)} ms`,
  );
  for (const failure of failures.slice(0, 10)) console.log(failure);
  process.exitCode = failures.length > 0 ? 1 : 0;
}
