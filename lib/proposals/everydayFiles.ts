import { readFile } from "node:fs/promises";
import path from "node:path";
import { openEverydayDetector, type EverydayDetector } from "./everyday";

const FOLDER = path.join(process.cwd(), "lib/proposals/detector");

let opened: Promise<EverydayDetector> | undefined;

/** The detector from the files that ship with the project; opened once a thread. Half a second of one core the first time. */
export function everydayDetector(): Promise<EverydayDetector> {
  opened ??= open();
  return opened;
}

async function open(): Promise<EverydayDetector> {
  const [graph, weights] = await Promise.all([
    readFile(path.join(FOLDER, "nanodet.json"), "utf8"),
    readFile(path.join(FOLDER, "nanodet.bin")),
  ]);
  const bytes = new Uint8Array(weights.byteLength);
  bytes.set(weights);
  return openEverydayDetector(JSON.parse(graph) as object, bytes.buffer);
}
