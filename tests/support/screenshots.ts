import { mkdir } from "node:fs/promises";
import path from "node:path";
import type { Browser, BrowserContextOptions } from "playwright-core";
import { launchBrowser } from "./browser";

type Cookie = { name: string; value: string };

export type ScreenshotJob = {
  baseUrl: string;
  /** Paths, or `[name, path]` where the path makes a poor file name. */
  paths: readonly (string | readonly [name: string, path: string])[];
  outDir: string;
  cookies?: readonly Cookie[];
  widths?: readonly number[];
  themes?: readonly ("light" | "dark")[];
  fullPage?: boolean;
  browser?: Browser;
};

export type Screenshot = { file: string; path: string; width: number; theme: string; problems: string[] };

const VIEWPORT_HEIGHT: Record<number, number> = { 1440: 900, 390: 844 };

/**
 * Takes each path at each width in each theme, as `<outDir>/<name>-<width>-<theme>.png`, and lists what went
 * wrong on the way: failed requests, console errors, and pages wider than the screen.
 */
export async function takeScreenshots(job: ScreenshotJob): Promise<Screenshot[]> {
  const { widths = [1440, 390], themes = ["light", "dark"], fullPage = true, cookies = [] } = job;
  await mkdir(job.outDir, { recursive: true });
  const browser = job.browser ?? (await launchBrowser());
  const taken: Screenshot[] = [];
  try {
    for (const width of widths) {
      for (const theme of themes) {
        const context = await browser.newContext(contextOptions(width, theme));
        await context.addCookies(cookies.map((cookie) => ({ ...cookie, url: job.baseUrl })));
        for (const entry of job.paths) {
          const [name, target] = typeof entry === "string" ? [nameOf(entry), entry] : entry;
          const problems: string[] = [];
          const page = await context.newPage();
          page.on("console", (message) => {
            // A failed request is reported below, with its address.
            if (message.type() === "error" && !message.text().startsWith("Failed to load resource"))
              problems.push(message.text());
          });
          page.on("response", (response) => {
            if (response.status() >= 400) problems.push(`${response.status()} ${response.url()}`);
          });
          page.on("pageerror", (error) => problems.push(error.message));
          await page.goto(new URL(target, job.baseUrl).href, { waitUntil: "load" });
          await page.evaluate(() => document.fonts.ready);
          await page.waitForTimeout(400); // lets the entrance of late data settle; a picture, not a test
          const overflowPx = await page.evaluate(
            () => document.documentElement.scrollWidth - document.documentElement.clientWidth,
          );
          if (overflowPx > 0) problems.push(`the page is ${overflowPx} px wider than the screen`);
          const file = path.join(job.outDir, `${name}-${width}-${theme}.png`);
          await page.screenshot({ path: file, fullPage });
          await page.close();
          taken.push({ file, path: target, width, theme, problems });
        }
        await context.close();
      }
    }
  } finally {
    if (!job.browser) await browser.close();
  }
  return taken;
}

function contextOptions(width: number, theme: "light" | "dark"): BrowserContextOptions {
  return {
    viewport: { width, height: VIEWPORT_HEIGHT[width] ?? 900 },
    colorScheme: theme,
    reducedMotion: "reduce",
    hasTouch: width < 600,
    isMobile: width < 600,
  };
}

function nameOf(target: string): string {
  return target.replace(/^\/+|\/+$/g, "").replace(/[^a-z0-9]+/gi, "-") || "landing";
}
