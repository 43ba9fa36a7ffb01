import { execFile } from "node:child_process";
import { access, mkdir, mkdtemp, readFile, rename, rm, writeFile } from "node:fs/promises";
import { createRequire } from "node:module";
import os from "node:os";
import path from "node:path";
import { promisify } from "node:util";
import chromiumPackage from "@sparticuz/chromium";
import { chromium, type Browser, type LaunchOptions } from "playwright-core";

const run = promisify(execFile);

// The package's own list is made for a function host: it switches web security off and runs one process.
// Tests must see the same-origin policy and the content security policy, so only what a container needs is set.
const CONTAINER_ARGS = [
  "--no-sandbox",
  "--no-zygote",
  "--disable-dev-shm-usage",
  "--disable-gpu",
  "--font-render-hinting=none",
  "--force-color-profile=srgb",
];

type Installed = { executablePath: string; env: Record<string, string> };

let installed: Promise<Installed> | undefined;

/**
 * Starts the Chromium that comes inside the npm package, with no system browser and no download.
 * The first call on a machine unpacks it (about 3 s); later ones reuse the copy of the same version.
 * The caller closes the browser.
 */
export async function launchBrowser(options: LaunchOptions = {}): Promise<Browser> {
  installed ??= install();
  const { executablePath, env } = await installed;
  return chromium.launch({
    headless: true,
    ...options,
    executablePath,
    args: [...CONTAINER_ARGS, ...(options.args ?? [])],
    env: { ...process.env, ...env, ...options.env },
  });
}

/** Where the unpacked browser is and what its environment needs; for tools that start it themselves. */
export function installedBrowser(): Promise<Installed> {
  return (installed ??= install());
}

async function install(): Promise<Installed> {
  const home = path.join(os.tmpdir(), `merestone-chromium-${await packageVersion()}-${os.userInfo().uid}`);
  const executablePath = path.join(home, "chromium");
  if (!(await exists(executablePath))) await unpackInto(home);
  const fontEnv = { FONTCONFIG_FILE: path.join(home, "fonts.conf"), TMPDIR: await browserTmp(home) };
  if (await starts(executablePath, fontEnv)) return { executablePath, env: fontEnv };
  const libraryEnv = { ...fontEnv, LD_LIBRARY_PATH: libraryPath(path.join(home, "al2023", "lib")) };
  if (await starts(executablePath, libraryEnv)) return { executablePath, env: libraryEnv };
  throw new Error(`The packaged Chromium in ${home} does not start, with or without its own libraries`);
}

/**
 * The package unpacks into `tmpdir()` and trusts any file that is already there, whatever its version and
 * however far another process has written it. So it gets a private folder, which is renamed when complete.
 */
async function unpackInto(home: string): Promise<void> {
  const staging = await mkdtemp(`${home}.`);
  const before = { TMPDIR: process.env["TMPDIR"], AWS_EXECUTION_ENV: process.env["AWS_EXECUTION_ENV"] };
  process.env["TMPDIR"] = staging;
  // This name makes the package unpack the NSS libraries too, which a bare machine lacks.
  process.env["AWS_EXECUTION_ENV"] = "AWS_Lambda_nodejs20.x";
  try {
    await chromiumPackage.executablePath();
  } finally {
    restore("TMPDIR", before.TMPDIR);
    restore("AWS_EXECUTION_ENV", before.AWS_EXECUTION_ENV);
  }
  await writeFile(path.join(staging, "fonts.conf"), fontsConf(home));
  try {
    await rename(staging, home);
  } catch (error) {
    await rm(staging, { recursive: true, force: true });
    // Another process finished first: its copy is as good as ours.
    if (!(await exists(path.join(home, "chromium")))) throw error;
  }
}

/** The packaged fonts.conf names fixed folders of a function host; ours names the folder that it is in. */
function fontsConf(home: string): string {
  const folders = [path.join(home, "fonts"), "/usr/share/fonts", "/usr/local/share/fonts"];
  return [
    '<?xml version="1.0"?>',
    '<!DOCTYPE fontconfig SYSTEM "fonts.dtd">',
    "<fontconfig>",
    ...folders.map((folder) => `  <dir>${folder}</dir>`),
    `  <cachedir>${path.join(home, "font-cache")}</cachedir>`,
    "</fontconfig>",
    "",
  ].join("\n");
}

async function packageVersion(): Promise<string> {
  const entry = createRequire(import.meta.url).resolve("@sparticuz/chromium");
  const root = entry.slice(0, entry.lastIndexOf("chromium", entry.lastIndexOf("build")) + "chromium".length);
  const manifest: unknown = JSON.parse(await readFile(path.join(root, "package.json"), "utf8"));
  if (typeof manifest !== "object" || manifest === null || !("version" in manifest))
    throw new Error("@sparticuz/chromium has no version");
  return String(manifest.version);
}

async function browserTmp(home: string): Promise<string> {
  const folder = path.join(home, "tmp");
  await mkdir(folder, { recursive: true });
  return folder;
}

async function starts(executablePath: string, env: Record<string, string>): Promise<boolean> {
  try {
    await run(executablePath, ["--version"], { env: { ...process.env, ...env }, timeout: 30_000 });
    return true;
  } catch {
    return false; // The caller tries the next set of libraries and reports when none is left.
  }
}

function libraryPath(folder: string): string {
  return [folder, process.env["LD_LIBRARY_PATH"]].filter(Boolean).join(":");
}

function restore(name: string, value: string | undefined): void {
  if (value === undefined) delete process.env[name];
  else process.env[name] = value;
}

async function exists(file: string): Promise<boolean> {
  try {
    await access(file);
    return true;
  } catch {
    return false; // Absence is the answer, not a failure.
  }
}
