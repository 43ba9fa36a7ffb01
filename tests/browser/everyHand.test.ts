import sharp from "sharp";
import { eq } from "drizzle-orm";
import type { Browser, CDPSession, Page } from "playwright-core";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { drafts, submissions } from "@/db/schema";
import type { Box, Point } from "@/lib/geometry/types";
import { findViolations } from "../support/axe";
import { launchBrowser } from "../support/browser";
import { DeskHands } from "../support/deskHands";
import { openBatch } from "../support/openBatch";
import { signIn } from "../support/people";
import { startStack, type Stack } from "../support/stack";

/** The desk in every hand and on every screen: keyboard alone, touch, pen; all EXIF orientations and pixel ratios. */
let stack: Stack;
let browser: Browser;
let batch: Awaited<ReturnType<typeof openBatch>>;

const SIZE = { width: 640, height: 480 } as const;
const ORIENTATIONS = [1, 2, 3, 4, 5, 6, 7, 8] as const;
const PEOPLE = ["tomas", "lioba", "maren", "jory", "sanna", "kofi", "elin", "bram"] as const;
type Who = (typeof PEOPLE)[number];

/**
 * Two red squares on grey in the upright picture; their centres are the known points. The large one is seen well
 * when the picture is small on the screen, the small one fits the screen when it is large.
 */
const LARGE = { sidePx: 96, centre: [420, 140] as Point };
const SMALL = { sidePx: 8, centre: [520, 380] as Point };

/** The upright picture, stored turned by the orientation's inverse under its tag: libvips does the turning. */
async function markedPicture(orientation: number): Promise<Buffer> {
  const marks = await Promise.all(
    [LARGE, SMALL].map(async ({ sidePx, centre }) => ({
      input: await sharp({ create: { width: sidePx, height: sidePx, channels: 3, background: "#ff0000" } })
        .png()
        .toBuffer(),
      left: centre[0] - sidePx / 2,
      top: centre[1] - sidePx / 2,
    })),
  );
  const upright = await sharp({ create: { ...SIZE, channels: 3, background: "#808080" } })
    .composite(marks)
    .png()
    .toBuffer();
  // What turns it back is its own inverse but for the two quarter turns, which undo each other.
  const inverse = orientation === 6 ? 8 : orientation === 8 ? 6 : orientation;
  const stored = await sharp(await sharp(upright).withMetadata({ orientation: inverse }).png().toBuffer())
    .autoOrient()
    .png()
    .toBuffer();
  return sharp(stored)
    .withMetadata({ orientation, exif: { IFD0: { ImageDescription: `orientation ${orientation}` } } })
    .jpeg({ quality: 95, chromaSubsampling: "4:4:4" })
    .toBuffer();
}

beforeAll(async () => {
  stack = await startStack();
  browser = await launchBrowser();
  const pictures = await Promise.all(
    ORIENTATIONS.map(async (orientation) => ({
      name: `orientation-${orientation}.jpg`,
      bytes: await markedPicture(orientation),
    })),
  );
  batch = await openBatch(stack, pictures);
});
afterAll(async () => {
  await browser?.close();
  await stack?.stop();
});

async function signedIn(who: Who, options: Parameters<Browser["newContext"]>[0] = {}) {
  const context = await browser.newContext({ viewport: { width: 1440, height: 900 }, ...options });
  context.setDefaultTimeout(20_000);
  const page = await context.newPage();
  await signIn(page, stack, batch.actors[who].email, batch.password);
  return { context, page };
}

async function openDesk(page: Page, claimId: string): Promise<DeskHands> {
  await page.goto(`${stack.url}/desk/${claimId}`);
  const hands = new DeskHands(page);
  await hands.ready();
  return hands;
}

const imageOf = (orientation: number) =>
  batch.images.find((image) => image.fileName === `orientation-${orientation}.jpg`)?.id ?? "";
const savedBoxes = (claimId: string): Box[] =>
  (batch.db.select().from(drafts).where(eq(drafts.claimId, claimId)).get()?.document.instances ?? []).flatMap(
    ({ shape }) => (shape.kind === "box" ? [shape.box] : []),
  );

describe("a whole task", () => {
  it("is done by the keyboard alone, from the board to handing in, without an axe violation", async () => {
    const { context, page } = await signedIn("bram");
    await page.goto(`${stack.url}/board`, { waitUntil: "networkidle" });
    await tabTo(page, "Begin");
    await page.keyboard.press("Enter");
    await page.waitForURL(/\/desk\//);
    const hands = new DeskHands(page);
    await hands.ready();
    await page.evaluate(() => (document.activeElement as HTMLElement | null)?.blur());
    const wanted: Box[] = [
      [40, 60, 55, 43],
      [301, 222, 128, 77],
    ];
    // The crosshair begins in the middle of the picture.
    let at: Point = [SIZE.width / 2, SIZE.height / 2];
    const walk = async (to: Point) => {
      for (const [axis, back, on] of [
        [0, "ArrowLeft", "ArrowRight"],
        [1, "ArrowUp", "ArrowDown"],
      ] as const) {
        const by = to[axis] - at[axis];
        const key = by < 0 ? back : on;
        for (let n = 0; n < Math.floor(Math.abs(by) / 10); n++) await page.keyboard.press(`Shift+${key}`);
        for (let n = 0; n < Math.abs(by) % 10; n++) await page.keyboard.press(key);
      }
      at = to;
    };
    for (const [x, y, w, h] of wanted) {
      await walk([x, y]);
      await page.keyboard.press("m");
      await walk([x + w, y + h]);
      await page.keyboard.press("m");
      await page.keyboard.press("Escape");
    }
    expect(await hands.count()).toBe(2);
    expect(await findViolations(page, "desk with shapes")).toEqual([]);
    await page.locator("[data-save=saved]").waitFor();
    await page.keyboard.press("Control+Enter");
    const dialog = page.getByRole("alertdialog");
    await dialog.waitFor();
    expect(await findViolations(page, "handing in")).toEqual([]);
    await tabTo(page, "Hand in");
    await page.keyboard.press("Enter");
    await page.getByText("Handed in.").first().waitFor();
    const handedIn = batch.db
      .select()
      .from(submissions)
      .where(eq(submissions.annotatorId, batch.actors.bram.id))
      .get();
    expect(handedIn?.document.instances.map(({ shape }) => shape)).toEqual(
      wanted.map((box) => ({ kind: "box", box })),
    );
    await context.close();
  });

  it("is done by touch: one finger draws, two pan and pinch and draw nothing", async () => {
    const { context, page } = await signedIn("elin", { hasTouch: true });
    const claimId = batch.claim("elin", imageOf(7));
    const hands = await openDesk(page, claimId);
    const cdp = await context.newCDPSession(page);
    const box: Box = [60, 80, 120, 90];
    const [from, to] = [await hands.at([box[0], box[1]]), await hands.at([box[0] + box[2], box[1] + box[3]])];
    await touch(cdp, [[from], [{ x: (from.x + to.x) / 2, y: (from.y + to.y) / 2 }], [to]]);
    await expect.poll(() => hands.count()).toBe(1);
    const before = await hands.view();
    const middle = await hands.at([320, 240]);
    const fingers = (apart: number, shift = 0) => [
      { x: middle.x - apart + shift, y: middle.y },
      { x: middle.x + apart + shift, y: middle.y },
    ];
    await touch(cdp, [fingers(60), fingers(90), fingers(120), fingers(120, 40)]);
    await expect.poll(async () => (await hands.view()).scale / before.scale).toBeGreaterThan(1.8);
    expect(await hands.count()).toBe(1);
    await page.locator("[data-save=saved]").waitFor();
    expect(savedBoxes(claimId)[0]?.map(Math.round)).toEqual(box);
    await context.close();
  });

  it("is done by a pen, whose palm draws nothing", async () => {
    const { context, page } = await signedIn("kofi", { hasTouch: true });
    const claimId = batch.claim("kofi", imageOf(6));
    const hands = await openDesk(page, claimId);
    const cdp = await context.newCDPSession(page);
    const box: Box = [300, 200, 80, 60];
    const pen = async (type: "mousePressed" | "mouseMoved" | "mouseReleased", point: Point) => {
      const { x, y } = await hands.at(point);
      const isDown = type !== "mouseReleased";
      await cdp.send("Input.dispatchMouseEvent", {
        type,
        x,
        y,
        button: "left",
        buttons: isDown ? 1 : 0,
        clickCount: 1,
        pointerType: "pen",
      });
    };
    await pen("mousePressed", [box[0], box[1]]);
    await pen("mouseMoved", [box[0] + 40, box[1] + 30]);
    await pen("mouseMoved", [box[0] + box[2], box[1] + box[3]]);
    await pen("mouseReleased", [box[0] + box[2], box[1] + box[3]]);
    await expect.poll(() => hands.count()).toBe(1);
    // The palm comes down beside it at once.
    const palm = await hands.at([100, 400]);
    await touch(cdp, [[palm], [{ x: palm.x + 60, y: palm.y - 50 }]]);
    await page.waitForTimeout(200);
    expect(await hands.count()).toBe(1);
    await page.locator("[data-save=saved]").waitFor();
    expect(savedBoxes(claimId)[0]?.map(Math.round)).toEqual(box);
    await context.close();
  });
});

describe("a known point", () => {
  const ZOOMS = 20;

  it.each([1, 1.5, 2, 3])(
    "is where the desk says it is, within half a pixel, under every orientation and at 20 zooms, at pixel ratio %s",
    { timeout: 300_000 },
    async (deviceScaleFactor) => {
      const off: string[] = [];
      let largest = 0;
      for (const [index, orientation] of ORIENTATIONS.entries()) {
        const who = PEOPLE[index] ?? "tomas";
        const { context, page } = await signedIn(who, { deviceScaleFactor });
        const hands = await openDesk(page, batch.claim(who, imageOf(orientation)));
        // Only the picture counts: what is drawn over it would hide a part of the mark.
        await page.addStyleTag({
          content: "[data-desk-stage] > :not(img), [data-desk-stage] ~ * { visibility: hidden !important }",
        });
        for (let zoom = 0; zoom < ZOOMS; zoom++) {
          const { scale } = await hands.view();
          const mark = scale < 1 ? LARGE : SMALL;
          const said = await hands.at(mark.centre);
          const seen = await markCentre(page, said, mark.sidePx * scale);
          const distance = Math.hypot(seen.x - said.x, seen.y - said.y);
          largest = Math.max(largest, distance);
          if (distance > 0.5)
            off.push(`orientation ${orientation}, scale ${scale.toFixed(3)}: ${distance.toFixed(2)} px`);
          const anchor = await hands.at(SMALL.centre);
          await page.mouse.move(anchor.x, anchor.y);
          await page.mouse.wheel(0, zoom < 7 ? 120 : -120);
          await page.waitForTimeout(25);
        }
        await context.close();
      }
      console.log(`pixel ratio ${deviceScaleFactor}: at most ${largest.toFixed(3)} px off`);
      expect(off).toEqual([]);
    },
  );
});

/** Centre of the red square on the screen, CSS px: mean of the pixels by their redness. */
async function markCentre(page: Page, near: { x: number; y: number }, sidePx: number) {
  const half = sidePx / 2 + 8;
  // Even, so that at a ratio of 1.5 too the cut falls between device pixels and moves nothing by a part of one.
  const even = (value: number) => Math.max(0, 2 * Math.floor(value / 2));
  const side = even(2 * half) + 4;
  const clip = { x: even(near.x - half), y: even(near.y - half), width: side, height: side };
  const { data, info } = await sharp(await page.screenshot({ clip, scale: "device" }))
    .removeAlpha()
    .raw()
    .toBuffer({ resolveWithObject: true });
  let [sum, sx, sy] = [0, 0, 0];
  for (let y = 0, i = 0; y < info.height; y++)
    for (let x = 0; x < info.width; x++, i += 3) {
      const red = (data[i] ?? 0) - ((data[i + 1] ?? 0) + (data[i + 2] ?? 0)) / 2;
      if (red < 12) continue;
      sum += red;
      sx += red * (x + 0.5);
      sy += red * (y + 0.5);
    }
  const ratio = info.width / clip.width;
  return { x: clip.x + sx / sum / ratio, y: clip.y + sy / sum / ratio };
}

/** Moves the focus on by Tab until it is on the button of this name. */
async function tabTo(page: Page, name: string): Promise<void> {
  for (let n = 0; n < 60; n++) {
    const text = await page.evaluate(() => document.activeElement?.textContent?.trim() ?? "");
    const tag = await page.evaluate(() => document.activeElement?.tagName ?? "");
    if (tag === "BUTTON" && text === name) return;
    await page.keyboard.press("Tab");
  }
  throw new Error(`Tab does not reach "${name}"`);
}

/** Fingers down at the first step, moved through the others, and lifted. */
async function touch(cdp: CDPSession, steps: { x: number; y: number }[][]): Promise<void> {
  for (const [index, points] of steps.entries()) {
    await cdp.send("Input.dispatchTouchEvent", {
      type: index === 0 ? "touchStart" : "touchMove",
      touchPoints: points.map((point, id) => ({ ...point, id })),
    });
    await new Promise((resolve) => setTimeout(resolve, 30));
  }
  await cdp.send("Input.dispatchTouchEvent", { type: "touchEnd", touchPoints: [] });
}
