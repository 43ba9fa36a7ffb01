import type { Browser, BrowserContext, Page } from "playwright-core";
import { eq } from "drizzle-orm";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { drafts } from "@/db/schema";
import type { Box } from "@/lib/geometry/types";
import { launchBrowser } from "../support/browser";
import { DeskHands } from "../support/deskHands";
import { pebblePicture } from "../support/jobPictures";
import { openBatch } from "../support/openBatch";
import { signIn } from "../support/people";
import { startStack, type Stack } from "../support/stack";

/**
 * Nothing that was drawn is ever lost: the renderer is killed, the network is cut and the session is ended in
 * mid-task, in the real application with its real worker.
 */
let stack: Stack;
let browser: Browser;
let batch: Awaited<ReturnType<typeof openBatch>>;

beforeAll(async () => {
  stack = await startStack();
  browser = await launchBrowser();
  batch = await openBatch(stack, [await pebblePicture("pole-01.jpg", 5)]);
});
afterAll(async () => {
  await browser?.close();
  await stack?.stop();
});

const KILLS = 50;
const OFFLINE_MS = 120_000;
/** A command is in the browser's own store within this time; a kill sooner may lose the last one, and only that. */
const KEPT_WITHIN_MS = 100;

/** Where the n-th box goes: a grid of small boxes that never meet, so that each press is on open ground. */
const place = (n: number): Box => [14 + (n % 10) * 60, 12 + Math.floor(n / 10) * 60, 26, 22];

async function atDesk(
  who: "tomas" | "lioba" | "maren",
): Promise<{ context: BrowserContext; page: Page; hands: DeskHands; claimId: string }> {
  const context = await browser.newContext({ viewport: { width: 1440, height: 900 } });
  context.setDefaultTimeout(20_000);
  const page = await context.newPage();
  await signIn(page, stack, batch.actors[who].email, batch.password);
  const claimId = batch.claim(who);
  return { context, claimId, ...(await openDesk(context, claimId, page)) };
}

async function openDesk(context: BrowserContext, claimId: string, given?: Page) {
  const page = given ?? (await context.newPage());
  await page.goto(`${stack.url}/desk/${claimId}`);
  const hands = new DeskHands(page);
  await hands.ready();
  return { page, hands };
}

async function draw(hands: DeskHands, n: number): Promise<void> {
  await hands.box(place(n));
  await hands.press("Escape");
}

/** The boxes of the draft on the server, by their place in the grid. */
function savedPlaces(claimId: string): number[] {
  const row = batch.db.select().from(drafts).where(eq(drafts.claimId, claimId)).get();
  return (row?.document.instances ?? [])
    .flatMap(({ shape }) =>
      shape.kind === "box"
        ? [Math.round((shape.box[0] - 14) / 60) + 10 * Math.round((shape.box[1] - 12) / 60)]
        : [],
    )
    .sort((a, b) => a - b);
}

const upTo = (count: number) => Array.from({ length: count }, (_, n) => n);

describe("what was drawn", () => {
  it(
    `outlives ${KILLS} kills of the renderer, and two minutes without a network beside them`,
    { timeout: 420_000 },
    async () => {
      // Lioba's network goes at once and stays away while Tomas's browser is killed again and again.
      const lioba = await atDesk("lioba");
      await draw(lioba.hands, 0);
      await lioba.page.locator("[data-save=saved]").waitFor();
      await lioba.context.setOffline(true);
      const cutAtMs = Date.now();
      await draw(lioba.hands, 1);
      await lioba.page.locator("[data-save=offline]").waitFor();

      const { context, claimId, page: first, hands: firstHands } = await atDesk("tomas");
      let [page, hands] = [first, firstHands];
      let seed = 11;
      const random = () => (seed = (seed * 48_271) % 2_147_483_647) / 2_147_483_647;
      for (let kill = 0; kill < KILLS; kill++) {
        await draw(hands, kill);
        expect(await hands.count()).toBe(kill + 1);
        await page.waitForTimeout(KEPT_WITHIN_MS + random() * 500);
        // Now and then the hand is in the middle of the next box: that one was not committed and may go.
        if (random() < 0.3) await hands.beginBox(place(kill + 1));
        await killRenderer(page);
        ({ page, hands } = await openDesk(context, claimId));
        await expect.poll(() => hands.count(), { timeout: 5000 }).toBe(kill + 1);
      }
      await page.locator("[data-save=saved]").waitFor();
      expect(savedPlaces(claimId)).toEqual(upTo(KILLS));

      // Lioba went on all the while.
      for (const n of [2, 3, 4]) await draw(lioba.hands, n);
      const left = OFFLINE_MS - (Date.now() - cutAtMs);
      if (left > 0) await lioba.page.waitForTimeout(left);
      expect(await lioba.hands.count()).toBe(5);
      expect(savedPlaces(lioba.claimId)).toEqual([0]);
      await lioba.context.setOffline(false);
      await lioba.page.locator("[data-save=saved]").waitFor();
      expect(savedPlaces(lioba.claimId)).toEqual(upTo(5));
      await context.close();
      await lioba.context.close();
    },
  );

  it("outlives the end of the session: one signs in beside it and goes on", async () => {
    const { context, page, hands, claimId } = await atDesk("maren");
    await draw(hands, 0);
    await page.locator("[data-save=saved]").waitFor();
    await context.clearCookies();
    await draw(hands, 1);
    await page.locator("[data-save=signed-out]").waitFor();
    await page.getByText("nothing is lost").waitFor();
    await draw(hands, 2);
    expect(savedPlaces(claimId)).toEqual([0]);

    const beside = await context.newPage();
    await signIn(beside, stack, batch.actors.maren.email, batch.password);
    await beside.close();
    await page.locator("[data-save=saved]").waitFor();
    expect(await hands.count()).toBe(3);
    expect(savedPlaces(claimId)).toEqual(upTo(3));
    await context.close();
  });
});

/** Ends the page's process as a crash does: no unload event, no last word. */
async function killRenderer(page: Page): Promise<void> {
  const session = await page.context().newCDPSession(page);
  const gone = page.waitForEvent("crash");
  void session.send("Page.crash").catch(() => undefined); // its answer never comes
  await gone;
  await page.close();
}
