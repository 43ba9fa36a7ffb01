import {
  mkdirSync,
  readdirSync,
  renameSync,
  rmSync,
  statSync,
  writeSync,
  openSync,
  closeSync,
  fsyncSync,
  existsSync,
} from "node:fs";
import path from "node:path";
import { parseArgs } from "node:util";

/** One option of a command. */
export type Option = {
  readonly help: string;
  /** Name of the value in the help; absent for a switch. */
  readonly value?: string;
  readonly required?: boolean;
  readonly multiple?: boolean;
};

export type Options = { readonly [name: string]: Option };

/** What was given: a list for `multiple`, text for a value, true or false for a switch. */
export type Values<O extends Options> = {
  readonly [K in keyof O]: O[K] extends { readonly multiple: true }
    ? readonly string[]
    : O[K] extends { readonly value: string }
      ? O[K] extends { readonly required: true }
        ? string
        : string | undefined
      : boolean;
};

export type Command<O extends Options> = {
  readonly name: string;
  readonly summary: string;
  readonly options: O;
  /** Further lines of the help. */
  readonly notes?: readonly string[];
};

/** Input that cannot be used. The message is one line that names file, record and reason. */
export class InputError extends Error {
  override readonly name = "InputError";
}

/** Exit code for input that cannot be used; a bug exits with 1. */
const EXIT_BAD_INPUT = 2;

/**
 * Runs a command-line entry: parses its arguments, prints the help for --help, and turns input that cannot be used into one
 * line on standard error and exit code 2.
 */
export async function runCommand<const O extends Options>(
  command: Command<O>,
  run: (values: Values<O>) => void | Promise<void>,
  args: readonly string[] = process.argv.slice(2),
): Promise<void> {
  try {
    const values = parseValues(command, args);
    if (values === "help") process.stdout.write(helpText(command));
    else await run(values);
  } catch (error) {
    if (!(error instanceof InputError)) throw error;
    process.stderr.write(`${command.name}: ${oneLine(error.message)}\n`);
    process.exitCode = EXIT_BAD_INPUT;
  }
}

function parseValues<O extends Options>(command: Command<O>, args: readonly string[]): Values<O> | "help" {
  if (args.includes("--help") || args.includes("-h")) return "help";
  const specs = Object.entries(command.options).map(
    ([name, { value, multiple }]) =>
      [name, { type: value === undefined ? "boolean" : "string", multiple: multiple === true }] as const,
  );
  let parsed: { values: { [name: string]: unknown } };
  try {
    parsed = parseArgs({
      args: [...args],
      options: Object.fromEntries(specs),
      strict: true,
      allowPositionals: false,
    });
  } catch (cause) {
    const reason =
      cause instanceof Error ? (cause.message.split(". ")[0] ?? cause.message) : "wrong arguments";
    throw new InputError(`${reason}; --help shows how it is used`, { cause });
  }
  const values: { [name: string]: unknown } = {};
  for (const [name, option] of Object.entries(command.options)) {
    const value = parsed.values[name];
    if (option.required && value === undefined)
      throw new InputError(`--${name} is missing; --help shows how it is used`);
    values[name] = value ?? (option.multiple ? [] : option.value === undefined ? false : undefined);
  }
  return values as Values<O>;
}

function helpText<O extends Options>({ name, summary, options, notes = [] }: Command<O>): string {
  const rows = Object.entries(options).map(([option, { value, help, required, multiple }]) => ({
    left: `--${option}${value === undefined ? "" : ` ${value}`}`,
    right: help,
    usage: `${required ? "" : "["}--${option}${value === undefined ? "" : ` ${value}`}${required ? "" : "]"}${multiple ? "..." : ""}`,
  }));
  const width = Math.max(...rows.map(({ left }) => left.length), "--help".length);
  const lines = [...rows, { left: "--help", right: "shows this text" }].map(
    ({ left, right }) => `  ${left.padEnd(width)}  ${right}`,
  );
  const usage = `npm run -s ${name} -- ${rows.map((row) => row.usage).join(" ")}`;
  return [summary, "", usage, "", ...lines, ...(notes.length > 0 ? ["", ...notes] : []), ""].join("\n");
}

/** A message that must stay on one line, whatever a file name or record holds. */
export function oneLine(text: string): string {
  return text.replaceAll(/\s*[\r\n\u2028\u2029]+\s*/g, " ").trim();
}

const SYSTEM_REASONS: { readonly [code: string]: string } = {
  ENOENT: "no such file or folder",
  EACCES: "permission denied",
  EPERM: "permission denied",
  EISDIR: "is a folder, not a file",
  ENOTDIR: "is not a folder",
  ENOSPC: "no space left",
  EMFILE: "too many open files",
  EROFS: "the file system is read-only",
};

/**
 * Runs a step over a file and names the file in whatever goes wrong with it: an error of the file system, or an error with
 * `record` and `reason`. Anything else is a bug and passes through.
 */
export function inFile<T>(file: string, step: () => T): T {
  try {
    return step();
  } catch (error) {
    throw withFile(file, error);
  }
}

function withFile(file: string, error: unknown): unknown {
  if (!(error instanceof Error)) return error;
  if ("reason" in error && "record" in error)
    return new InputError(`${file}: ${error.message}`, { cause: error });
  if ("code" in error && typeof error.code === "string" && error.code in SYSTEM_REASONS) {
    return new InputError(`${file}: ${SYSTEM_REASONS[error.code]}`, { cause: error });
  }
  return error;
}

/**
 * Writes a file whole or not at all: into a temporary file beside it, which takes its name when everything is written.
 */
export function writeFileWhole(file: string, chunks: Iterable<string | Uint8Array>): void {
  const partial = `${file}.${process.pid}.partial`;
  inFile(file, () => {
    mkdirSync(path.dirname(path.resolve(file)), { recursive: true });
    if (existsSync(file) && statSync(file).isDirectory())
      throw new InputError(`${file}: is a folder, not a file`);
  });
  try {
    const handle = inFile(file, () => openSync(partial, "w"));
    try {
      for (const chunk of buffered(chunks)) inFile(file, () => writeAll(handle, chunk));
      fsyncSync(handle);
    } finally {
      closeSync(handle);
    }
    inFile(file, () => renameSync(partial, file));
  } catch (error) {
    rmSync(partial, { force: true });
    throw error;
  }
}

/**
 * Writes a folder whole or not at all: into a temporary folder beside it, which takes its name when everything is written.
 * A folder that is there and not empty is refused rather than mixed with.
 */
export function writeFolderWhole(
  folder: string,
  files: Iterable<{ readonly path: string; readonly bytes: Uint8Array }>,
): number {
  const target = path.resolve(folder);
  inFile(folder, () => {
    mkdirSync(path.dirname(target), { recursive: true });
    if (existsSync(target) && readdirSync(target).length > 0) {
      throw new InputError(`${folder}: is there already and not empty; name a new folder`);
    }
  });
  const partial = `${target}.${process.pid}.partial`;
  inFile(folder, () => mkdirSync(partial));
  try {
    let count = 0;
    for (const file of files) {
      const place = path.join(partial, file.path);
      mkdirSync(path.dirname(place), { recursive: true });
      writeFileWhole(place, [file.bytes]);
      count++;
    }
    if (existsSync(target)) rmSync(target, { recursive: true });
    inFile(folder, () => renameSync(partial, target));
    return count;
  } catch (error) {
    rmSync(partial, { recursive: true, force: true });
    throw error;
  }
}

const BUFFER_CHARACTERS = 1 << 16;

/** Gathers small pieces of text, so that a record is not a system call. */
function* buffered(chunks: Iterable<string | Uint8Array>): Generator<Uint8Array> {
  let pending: string[] = [];
  let characters = 0;
  for (const chunk of chunks) {
    if (typeof chunk !== "string") {
      if (characters > 0) yield Buffer.from(pending.join(""));
      [pending, characters] = [[], 0];
      yield chunk;
      continue;
    }
    pending.push(chunk);
    characters += chunk.length;
    if (characters >= BUFFER_CHARACTERS) {
      yield Buffer.from(pending.join(""));
      [pending, characters] = [[], 0];
    }
  }
  if (characters > 0) yield Buffer.from(pending.join(""));
}

function writeAll(handle: number, chunk: Uint8Array): void {
  for (let at = 0; at < chunk.length;) at += writeSync(handle, chunk, at);
}

const REDRAW_MS = 100;

/** A progress line on standard error; silent where that is no terminal. `done` ends it. */
export function progressLine(label: string): { step: (done: number, all: number) => void; done: () => void } {
  if (!process.stderr.isTTY) return { step: () => undefined, done: () => undefined };
  let drawnAtMs = 0;
  return {
    step: (done, all) => {
      const nowMs = performance.now();
      if (nowMs - drawnAtMs < REDRAW_MS && done < all) return;
      drawnAtMs = nowMs;
      const percent = all > 0 ? Math.floor((100 * done) / all) : 100;
      process.stderr.write(`\r${label} ${String(percent).padStart(3)} %`);
    },
    done: () => process.stderr.write("\r\u001b[K"),
  };
}
