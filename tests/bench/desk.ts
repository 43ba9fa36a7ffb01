import type { Page } from "playwright-core";
import sharp from "sharp";
import { launchBrowser } from "../support/browser";
import { DeskHands } from "../support/deskHands";
import { serveDesk } from "../support/desk-harness/serve";

/**
 * Measures the desk in the packaged Chromium (no GPU: raster in software), production build, on a picture of
 * 24 megapixels with 1,000 outlines of 50 vertices: the time between frames while the hand pans, zooms and drags
 * a vertex, the time from a pointer event to the frame that shows it, and the time to open. The same paths on
 * a plain 2D canvas, all redrawn for each frame, stand beside it.
 */
const [WIDTH, HEIGHT, SHAPES, VERTICES, MOVES] = [6000, 4000, 1000, 50, 90];

const quantile = (values: readonly number[], share: number) =>
  values.toSorted((a, b) => a - b)[Math.min(values.length - 1, Math.floor(share * values.length))] ??
  Number.NaN;

type Times = { frames: number[]; latencies: number[] };

/** Does a step of work for each frame inside the page; answers the gaps between frames and the event-to-frame times. */
async function timed(page: Page, steps: number, work: string): Promise<Times> {
  return page.evaluate(
    async ([count, body]) => {
      const act = new Function("i", "stage", body) as (i: number, stage: HTMLElement) => void;
      const stage = document.querySelector<HTMLElement>("[data-desk-stage]") ?? document.body;
      const frames: number[] = [];
      const latencies: number[] = [];
      let last = await new Promise<number>(requestAnimationFrame);
      for (let i = 0; i < count; i++) {
        const start = performance.now();
        act(i, stage);
        const now = await new Promise<number>((shown) =>
          requestAnimationFrame(() => setTimeout(() => shown(performance.now()), 0)),
        );
        frames.push(now - last);
        latencies.push(now - start);
        last = now;
      }
      return { frames, latencies };
    },
    [steps, work] as const,
  );
}

const POINTER = `const send = (type, x, y, buttons) => stage.dispatchEvent(new PointerEvent(type, { bubbles: true, pointerId: 1, pointerType: "mouse", clientX: x, clientY: y, button: type === "pointermove" ? -1 : 0, buttons }));
const r = stage.getBoundingClientRect();`;
const ZOOM = `const r = stage.getBoundingClientRect(); stage.dispatchEvent(new WheelEvent("wheel", { bubbles: true, cancelable: true, clientX: r.x + r.width / 2, clientY: r.y + r.height / 2, deltaY: i < 45 ? -40 : 40 }));`;
const PAN = `${POINTER} send("pointermove", r.x + 300 + 3 * i, r.y + 300 + 2 * (i % 20), 4);`;
const DRAG = `${POINTER} send("pointermove", r.x + r.width / 2 + 40 * Math.sin(i / 5), r.y + r.height / 2 + 40 * Math.cos(i / 5), 1);`;

const PLAIN = `
  if (!window.plain) {
    const canvas = document.body.appendChild(document.createElement("canvas"));
    canvas.width = 1100; canvas.height = 740; canvas.style.cssText = "position:fixed;inset:0;z-index:9999";
    const paths = [];
    const across = Math.ceil(Math.sqrt((1000 * 6000) / 4000)), cell = 6000 / across;
    for (let s = 0; s < 1000; s++) {
      const path = new Path2D();
      for (let v = 0; v < 50; v++) {
        const a = (2 * Math.PI * v) / 50, q = cell * (0.34 + 0.08 * Math.sin(5 * a + s));
        path.lineTo(((s % across) + 0.5) * cell + q * Math.cos(a), (Math.floor(s / across) + 0.5) * cell + q * Math.sin(a));
      }
      path.closePath(); paths.push(path);
    }
    window.plain = { ink: canvas.getContext("2d"), paths };
  }
  const { ink, paths } = window.plain;
  const k = 0.17;
  ink.setTransform(1, 0, 0, 1, 0, 0); ink.clearRect(0, 0, 1100, 740); ink.setTransform(k, 0, 0, k, i * 2, i);
  for (const path of paths) {
    ink.fillStyle = "#0072b233"; ink.fill(path, "evenodd");
    ink.strokeStyle = "#0a1014"; ink.lineWidth = 3.4 / k; ink.stroke(path);
    ink.strokeStyle = "#0072b2"; ink.lineWidth = 1.8 / k; ink.stroke(path);
  }`;

function line(name: string, { frames, latencies }: Times): string {
  const at = (values: readonly number[], share: number) => quantile(values, share).toFixed(1).padStart(7);
  return `${name.padEnd(34)}${at(frames, 0.5)}${at(frames, 0.95)}${at(latencies, 0.5)}${at(latencies, 0.98)}`;
}

async function main(): Promise<void> {
  const noise = { type: "gaussian", mean: 128, sigma: 30 } as const;
  const picture = await sharp({
    create: { width: WIDTH, height: HEIGHT, channels: 3, background: "#888", noise },
  })
    .png({ compressionLevel: 1 })
    .toBuffer();
  const served = await serveDesk(picture);
  const browser = await launchBrowser();
  try {
    const page = await browser.newPage({ viewport: { width: 1440, height: 900 } });
    await page.addInitScript(
      ([width, height, shapes, vertices]) => {
        window.deskTask = { width, height };
        window.crowd = { shapes, vertices };
      },
      [WIDTH, HEIGHT, SHAPES, VERTICES] as const,
    );
    const empty = await timed(await blank(page, served.url), MOVES, "");
    const began = performance.now();
    await page.goto(served.url);
    await new DeskHands(page).stage.waitFor();
    await page.waitForFunction(() => {
      const image = document.querySelector<HTMLImageElement>("[data-desk-stage] img");
      return document.querySelector("[data-desk-stage]")?.hasAttribute("data-scale") && image?.complete;
    });
    const openMs = performance.now() - began;
    await page.waitForTimeout(1500);
    const zoom = await timed(page, MOVES, ZOOM);
    const box = await page.locator("[data-desk-stage]").boundingBox();
    if (!box) throw new Error("the stage has no place");
    await page.mouse.move(box.x + 300, box.y + 300);
    await page.mouse.down({ button: "middle" });
    const pan = await timed(page, MOVES, PAN);
    await page.mouse.up({ button: "middle" });
    await page.keyboard.press("w");
    await page.keyboard.press("]");
    await page.keyboard.press("Shift+w");
    await page.waitForTimeout(500);
    const first = await page.evaluate(
      ([width, height, shapes]) => {
        const cell = width / Math.ceil(Math.sqrt((shapes * width) / height));
        return [0.5 * cell + cell * 0.34, 0.5 * cell] as const; // the first outline's first vertex
      },
      [WIDTH, HEIGHT, SHAPES] as const,
    );
    const view = await page.evaluate(() => {
      const { scale, x, y } = document.querySelector<HTMLElement>("[data-desk-stage]")?.dataset ?? {};
      return [Number(scale), Number(x), Number(y)] as const;
    });
    await page.mouse.move(box.x + first[0] * view[0] + view[1], box.y + first[1] * view[0] + view[2]);
    await page.mouse.down();
    await page.mouse.move(box.x + box.width / 2, box.y + box.height / 2, { steps: 3 });
    const drag = await timed(page, MOVES, DRAG);
    const mode = await page.locator("[data-desk-stage]").getAttribute("data-tool");
    await page.mouse.up();
    const plain = await timed(page, MOVES, PLAIN);
    console.log(
      `${SHAPES} outlines of ${VERTICES} vertices, ${WIDTH} x ${HEIGHT} px, ${MOVES} frames each, ms`,
    );
    console.log(
      `${"".padEnd(34)}${"frame".padStart(7)}${"p95".padStart(7)}${"event".padStart(7)}${"p98".padStart(7)}`,
    );
    console.log(line("nothing at all (the display)", empty));
    console.log(line("desk: zoom", zoom));
    console.log(line("desk: pan", pan));
    console.log(line(`desk: vertex drag (${mode})`, drag));
    console.log(line("plain canvas: pan, all redrawn", plain));
    console.log(`opened in ${Math.round(openMs)} ms`);
  } finally {
    await browser.close();
    await served.close();
  }
}

async function blank(page: Page, url: string): Promise<Page> {
  await page.goto(new URL("/picture.png", url).href);
  return page;
}

await main();
