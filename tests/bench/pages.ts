import type { BrowserContext, Page } from "playwright-core";
import { launchBrowser } from "@/tests/support/browser";
import { discoverScreens, signInAs, DEMO_PASSWORD, type Screen } from "@/tests/support/screens";

/**
 * `npm run bench:pages [-- --at URL] [-- --rounds N]`: how fast the running demo (`npm run demo`) answers.
 *
 * Server time: whole HTML of each screen over loopback HTTP with a signed-in session, first byte to last, after
 * two warm-up requests; median and p95 of N rounds. Desk: from the press on "Begin" on the board to the picture
 * painted on the stage, in real Chromium, five tasks. Exits 1 when a median misses its target.
 */
const PAGE_TARGET_MS = 200;
const DESK_TARGET_MS = 1000;

const option = (name: string, fallback: string) => {
  const index = process.argv.indexOf(`--${name}`);
  return index >= 0 ? (process.argv[index + 1] ?? fallback) : fallback;
};

const at = (sorted: readonly number[], share: number) =>
  sorted[Math.min(sorted.length - 1, Math.floor(share * sorted.length))] ?? NaN;

async function timePage(base: string, screen: Screen, cookie: string, rounds: number): Promise<number[]> {
  const times: number[] = [];
  for (let round = -2; round < rounds; round++) {
    const start = performance.now();
    const answer = await fetch(base + screen.path, { headers: { cookie }, redirect: "manual" });
    const body = await answer.text();
    if (answer.status !== 200)
      throw new Error(`${screen.path} answered ${answer.status}: ${body.slice(0, 80)}`);
    if (round >= 0) times.push(performance.now() - start);
  }
  return times.sort((a, b) => a - b);
}

async function timeDesk(context: BrowserContext, base: string): Promise<number[]> {
  const times: number[] = [];
  const page: Page = await context.newPage();
  for (let task = 0; task < 5; task++) {
    await page.goto(`${base}/board`, { waitUntil: "networkidle" });
    const draw = page.getByRole("button", { name: "Begin", exact: true }).first();
    if ((await draw.count()) === 0) break;
    const start = performance.now();
    await draw.click();
    await page.locator("[data-desk-stage]").waitFor();
    await page.waitForFunction(() => {
      const image = document.querySelector<HTMLImageElement>("[data-desk-stage] img");
      return image?.complete === true && image.naturalWidth > 0;
    });
    times.push(performance.now() - start);
  }
  return times.sort((a, b) => a - b);
}

async function main(): Promise<void> {
  const base = option("at", `http://127.0.0.1:${process.env.PORT ?? 3000}`);
  const rounds = Number(option("rounds", "21"));
  const answer = await fetch(`${base}/api/health`).catch(() => null);
  if (!answer?.ok)
    throw new Error(`Nothing answers at ${base}. Start "npm run demo" first, or give --at URL.`);

  const browser = await launchBrowser();
  let missed = 0;
  try {
    console.log(`${"screen".padEnd(28)}${"median ms".padStart(11)}${"p95 ms".padStart(9)}`);
    for (const role of ["visitor", "requester", "annotator", "admin"] as const) {
      const context = await browser.newContext();
      if (role !== "visitor") await signInAs(context, base, role, DEMO_PASSWORD);
      const cookie = (await context.cookies()).map(({ name, value }) => `${name}=${value}`).join("; ");
      for (const screen of await discoverScreens(context, base, role)) {
        const times = await timePage(base, screen, cookie, rounds);
        const median = at(times, 0.5);
        if (median >= PAGE_TARGET_MS) missed++;
        console.log(
          `${screen.name.padEnd(28)}${median.toFixed(0).padStart(11)}${at(times, 0.95).toFixed(0).padStart(9)}`,
        );
      }
      if (role === "annotator") {
        const times = await timeDesk(context, base);
        if (times.length > 0) {
          const median = at(times, 0.5);
          if (median >= DESK_TARGET_MS) missed++;
          console.log(
            `${"desk opens (browser)".padEnd(28)}${median.toFixed(0).padStart(11)}${at(times, 0.95).toFixed(0).padStart(9)}`,
          );
        }
      }
      await context.close();
    }
  } finally {
    await browser.close();
  }
  console.log(
    missed === 0
      ? `Every median is under ${PAGE_TARGET_MS} ms (desk: ${DESK_TARGET_MS} ms).`
      : `${missed} medians miss their target.`,
  );
  process.exitCode = missed === 0 ? 0 : 1;
}

main().catch((error: unknown) => {
  console.error(error instanceof Error ? error.message : error);
  process.exit(1);
});
