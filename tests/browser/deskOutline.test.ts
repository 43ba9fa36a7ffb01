import type { Browser, Page } from "playwright-core";
import { afterAll, beforeAll, beforeEach, describe, expect, it } from "vitest";
import type { DeskDocument, DeskProposal, DeskTask } from "@/lib/contracts/desk";
import { boxIou, boxOfShape } from "@/lib/geometry/box";
import { ringsArea } from "@/lib/geometry/region";
import type { Box } from "@/lib/geometry/types";
import { launchBrowser } from "../support/browser";
import { serveDesk } from "../support/desk-harness/serve";
import { DeskHands } from "../support/deskHands";
import { coinsPicture } from "../support/jobPictures";

/** Boxes in a class of outlines, on the desk as it is built, with its real worker, on the photograph of coins. */
let desk: Awaited<ReturnType<typeof serveDesk>>;
let browser: Browser;
let page: Page;
let hands: DeskHands;

const coins: readonly Box[] = coinsPicture()
  .truth.map(({ box }) => box)
  .slice(0, 3);
const proposals = coins.map((box, index): DeskProposal => ({
  id: `p${index}`,
  classId: "bottle",
  shape: { kind: "box", box },
  score: 0.9 - index / 100,
}));

beforeAll(async () => {
  desk = await serveDesk();
  browser = await launchBrowser();
}, 120_000);
afterAll(async () => {
  await browser?.close();
  await desk?.close();
});
beforeEach(async () => {
  const context = await browser.newContext({ viewport: { width: 1440, height: 900 } });
  page = await context.newPage();
  page.setDefaultTimeout(20_000);
  page.on("pageerror", (error) => console.error(error));
  hands = new DeskHands(page);
  return () => context.close();
});

async function open(task: Partial<DeskTask>): Promise<void> {
  await page.addInitScript((given) => {
    window.deskTask = given;
  }, task);
  await page.goto(desk.url);
  await hands.ready();
}

const newest = () => page.evaluate(() => window.saved.at(-1));
const shapesOf = (document: DeskDocument | undefined) => document?.instances.map(({ shape }) => shape) ?? [];

async function handIn(): Promise<void> {
  await page.getByRole("button", { name: "Hand in" }).first().click();
  await confirm();
}
const confirm = () => page.getByRole("alertdialog").getByRole("button", { name: "Hand in" }).click();

describe("a box in a class of outlines", () => {
  it("is outlined by itself when it is taken, three in a row too, and then handed in", async () => {
    await open({ proposals });
    for (const _ of proposals) await hands.press("j");
    await expect
      .poll(async () => shapesOf(await newest()).map(({ kind }) => kind), { timeout: 20_000 })
      .toEqual(["polygon", "polygon", "polygon"]);
    const document = await newest();
    for (const [index, shape] of shapesOf(document).entries()) {
      const box = coins[index];
      if (shape.kind !== "polygon" || !box) throw new Error("an outline was expected");
      expect(boxIou(boxOfShape(shape), box)).toBeGreaterThan(0.7);
      // A round coin fills pi/4 of its box; a stand-in rectangle would fill all of it.
      expect(ringsArea(shape.rings) / (box[2] * box[3])).toBeLessThan(0.92);
    }
    expect(document?.instances.map(({ origin }) => origin)).toEqual(["taken", "taken", "taken"]);
    await handIn();
    await expect.poll(() => page.evaluate(() => window.handedIn.length)).toBe(1);
  });

  it("is outlined when handing in where it was drawn, shown, and handed in at the second press", async () => {
    const [box] = coins;
    if (!box) throw new Error("the photograph holds coins");
    await open({});
    await hands.box(box);
    await handIn();
    await page.getByText("One box was in a class that wants an outline").waitFor({ timeout: 20_000 });
    expect(await page.evaluate(() => window.handedIn.length)).toBe(0);
    await confirm();
    await expect.poll(() => page.evaluate(() => window.handedIn.length)).toBe(1);
    const handedIn = await page.evaluate(() => window.handedIn[0]);
    expect(shapesOf(handedIn).map(({ kind }) => kind)).toEqual(["polygon"]);
  });

  it("is its rectangle where the outline cannot be made, so that the drawing can still be handed in", async () => {
    const [box] = coins;
    if (!box) throw new Error("the photograph holds coins");
    await page.addInitScript(() => {
      window.createImageBitmap = () => Promise.reject(new Error("not to be had"));
    });
    await open({ proposals: proposals.slice(0, 1) });
    await hands.press("j");
    await handIn();
    await page.getByText("was outlined just now").waitFor({ timeout: 20_000 });
    await confirm();
    await expect.poll(() => page.evaluate(() => window.handedIn.length)).toBe(1);
    const [shape] = shapesOf(await page.evaluate(() => window.handedIn[0]));
    expect(shape?.kind === "polygon" && ringsArea(shape.rings)).toBeCloseTo(box[2] * box[3], 3);
  });
});
