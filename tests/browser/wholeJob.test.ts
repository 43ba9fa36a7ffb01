import { createHash } from "node:crypto";
import { readFile } from "node:fs/promises";
import Database from "better-sqlite3";
import type { Browser, BrowserContext, Page } from "playwright-core";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import type { DeskDocument, DeskTask } from "@/lib/contracts/desk";
import { shapeIou } from "@/lib/geometry/iou";
import type { Box, Point, Shape } from "@/lib/geometry/types";
import { hashPassword } from "@/lib/auth/password";
import { launchBrowser } from "../support/browser";
import { findViolations } from "../support/axe";
import { DeskHands } from "../support/deskHands";
import { signIn, signUpByMail } from "../support/people";
import { coinsPicture, pebblePicture, turned, type TestPicture } from "../support/jobPictures";
import { discoverScreens } from "../support/screens";
import { startStack, type Stack } from "../support/stack";
import { unzip } from "../support/unzip";

/**
 * The whole job in the real application, with the real worker and the stand-ins: people sign up by mail,
 * pictures go up, a card pays, annotators draw, consensus settles, one picture is decided, people are paid
 * out, the release is downloaded and compared with the truth, and the books balance.
 */
let stack: Stack;
let browser: Browser;
let pictures: TestPicture[];
const contexts: BrowserContext[] = [];

const ADMIN = { email: "ada.merrin@merestone.example", password: "a long admin password" };
/** The picture on which nobody agrees. */
const SPLIT = "pebbles-05.jpg";
/** Pictures that each annotator draws by hand; the rest is handed in through the desk's own endpoints. */
const BY_HAND = new Set(["pebbles-01.jpg", "coins.png"]);

beforeAll(async () => {
  stack = await startStack();
  browser = await launchBrowser();
  pictures = [
    ...(await Promise.all(
      Array.from({ length: 10 }, (_, index) =>
        pebblePicture(`pebbles-${String(index + 1).padStart(2, "0")}.jpg`, 40 + index),
      ),
    )),
    await turned(await pebblePicture("turned.jpg", 77)),
    coinsPicture(),
  ];
  const db = new Database(stack.databaseFile);
  db.prepare(
    "insert into users (id, email, name, role, password_hash, email_verified_at_ms, created_at_ms) values (?, ?, ?, 'admin', ?, 1, 1)",
  ).run("usr_admin", ADMIN.email, "Ada Merrin", await hashPassword(ADMIN.password));
  db.close();
});

afterAll(async () => {
  await Promise.all(contexts.map((context) => context.close()));
  await browser?.close();
  await stack?.stop();
});

async function freshPage(): Promise<Page> {
  const context = await browser.newContext({ viewport: { width: 1440, height: 900 }, acceptDownloads: true });
  context.setDefaultTimeout(20_000);
  contexts.push(context);
  return context.newPage();
}

const truthOf = (name: string) => pictures.find((picture) => picture.name === name)?.truth ?? [];

/** A ring shifted by a person's own error, px. */
const shifted = (ring: readonly Point[], dx: number, dy: number): Point[] =>
  ring.map(([x, y]) => [Math.max(0, x + dx), Math.max(0, y + dy)]);

describe("the whole job", () => {
  it(
    "goes from an empty database to a release that fits the truth, and the books balance",
    { timeout: 420_000 },
    async () => {
      // ---- the requester signs up by mail link and uploads
      const requester = await freshPage();
      await signUpByMail(requester, stack, {
        name: "Ines Calder",
        email: "ines@skerrow.example",
        role: "requester",
      });
      await requester.getByRole("link", { name: "New batch" }).first().click();
      await requester.getByLabel("Title").fill("Pebbles and coins");
      await requester.getByRole("button", { name: "Go on to the pictures" }).click();
      await requester.waitForURL(/\/setup\/images$/);
      const batchId = /batches\/([^/]+)\//.exec(requester.url())?.[1] ?? "";
      await requester.locator("input[type=file]").setInputFiles([
        ...pictures.map(({ name, bytes }) => ({
          name,
          buffer: bytes,
          mimeType: name.endsWith("png") ? "image/png" : "image/jpeg",
        })),
        {
          name: "notes.jpg",
          buffer: Buffer.from("these are notes, not a picture"),
          mimeType: "image/jpeg",
        },
        { name: "report.pdf", buffer: Buffer.from("%PDF-1.7"), mimeType: "application/pdf" },
        { name: "copy-of-01.jpg", buffer: pictures[0]?.bytes ?? Buffer.alloc(0), mimeType: "image/jpeg" },
      ]);
      await requester.getByRole("heading", { name: "In the batch: 12" }).waitFor({ timeout: 60_000 });
      await requester.getByText("whatever its name says").waitFor();
      await requester.getByText("Not a JPEG, PNG, WebP, AVIF or TIFF picture.").waitFor();
      await requester.getByText(/The same picture is here already/).waitFor();
      // The turned photograph is upright, and nothing of its camera is left in the stored copy.
      const list = (await (
        await requester.request.get(`${stack.url}/api/batches/${batchId}/images`)
      ).json()) as {
        images: { id: string; fileName: string; status: string; width: number; height: number }[];
      };
      const turnedImage = list.images.find((image) => image.fileName === "turned.jpg");
      expect([turnedImage?.width, turnedImage?.height]).toEqual([640, 480]);
      const stored = await (
        await requester.request.get(`${stack.url}/api/images/${turnedImage?.id}/working`)
      ).body();
      expect(stored.includes("Testcam") || stored.includes("Exif")).toBe(false);
      const idOf = new Map(list.images.map((image) => [image.fileName, image.id]));

      // ---- key and brief, quality and pay
      await requester.getByRole("link", { name: "Go on to key and brief" }).click();
      await requester.getByLabel("Name of class 1").fill("pebble");
      await requester.getByRole("button", { name: "Add a class" }).click();
      await requester.getByLabel("Name of class 2").fill("coin");
      await requester.getByLabel("Drawn as").nth(1).selectOption("box");
      await requester.getByRole("button", { name: "Save and go on" }).click();
      await requester.waitForURL(/\/setup\/pay$/);
      await requester.getByLabel("Fewest annotators a picture").fill("3");
      await requester.getByLabel("Most annotators a picture").fill("3");
      await requester.getByText("Never more than").waitFor();
      await requester.getByRole("button", { name: "Save and go on" }).click();
      await requester.waitForURL(/\/setup\/review$/);

      // ---- the card is declined once, then pays
      await requester.getByRole("button", { name: "Pay by card" }).click();
      await requester.waitForURL(/\/checkout\//);
      await pay(requester, "4000 0000 0000 0002");
      await requester.getByText("Your card was declined.").waitFor();
      await pay(requester, "4242 4242 4242 4242");
      await requester.waitForURL(/\/setup\/review/);
      await expect
        .poll(
          async () => {
            await requester.reload();
            return requester.getByRole("button", { name: "Fund and open" }).count();
          },
          { timeout: 20_000 },
        )
        .toBe(1);
      await requester.waitForLoadState("networkidle");
      await requester.getByRole("button", { name: "Fund and open" }).click();
      await requester.getByRole("alertdialog").getByRole("button", { name: "Fund and open" }).click();
      await requester.waitForURL((url) => url.pathname === `/batches/${batchId}`);
      await waitForProposals(batchId);

      // ---- three annotators draw
      const annotators = [];
      for (const [index, name] of ["Tomas Brandt", "Lioba Fenn", "Maren Holt"].entries()) {
        const page = await freshPage();
        await signUpByMail(page, stack, {
          name,
          email: `annotator${index}@skerrow.example`,
          role: "annotator",
        });
        annotators.push(page);
      }
      for (const [index, page] of annotators.entries()) {
        for (const picture of pictures) {
          if (BY_HAND.has(picture.name))
            await drawByHand(page, batchId, idOf.get(picture.name) ?? "", picture, index);
          else await handIn(page, batchId, idOf.get(picture.name) ?? "", picture, index);
        }
      }

      // ---- consensus settles all but one; that one is on the docket
      await expect.poll(() => states(batchId), { timeout: 60_000 }).toEqual({ settled: 11, split: 1 });
      const taken = query<{ document: string }>(
        "select document from submissions where batch_id = ?",
        batchId,
      ).flatMap((row) =>
        (JSON.parse(row.document) as DeskDocument).instances.filter(
          (instance) => instance.origin !== "drawn",
        ),
      );
      expect(taken.length).toBeGreaterThan(0);

      const admin = await freshPage();
      await signIn(admin, stack, ADMIN.email, ADMIN.password);
      await admin.waitForURL(/\/docket$/);
      await admin.getByRole("link", { name: SPLIT }).click();
      await admin.getByText("Earlier decisions like this one").waitFor();
      await admin.waitForLoadState("networkidle");
      await admin.getByLabel(/what Tomas Brandt drew/).check();
      await admin
        .getByRole("textbox", { name: "Reason" })
        .fill("This submission follows the visible edges as the brief asks.");
      await admin.getByRole("button", { name: "Decide" }).click();
      await admin.getByRole("alertdialog").getByRole("button", { name: "Decide" }).click();
      await admin.getByText("Decided: one submission picked").waitFor();
      expect(states(batchId)).toEqual({ settled: 12 });

      // ---- everybody is paid out
      for (const page of annotators) {
        await page.goto(`${stack.url}/earnings`, { waitUntil: "networkidle" });
        await page.getByRole("button", { name: "Register a bank account" }).click();
        await page.waitForURL(/\/onboarding\//);
        await page.getByRole("button", { name: "Finish onboarding" }).click();
        await page.waitForURL(/\/earnings/);
        await page.waitForLoadState("networkidle");
        await page.getByRole("button", { name: "Pay out" }).click();
        await page.getByRole("alertdialog").getByRole("button", { name: "Pay out" }).click();
        await page.getByText("It is on its way.").waitFor();
      }
      await expect
        .poll(() => query<{ status: string }>("select status from payouts").map((row) => row.status), {
          timeout: 30_000,
        })
        .toEqual(["paid", "paid", "paid"]);

      // ---- the release is downloaded and fits the truth
      await requester.goto(`${stack.url}/batches/${batchId}`, { waitUntil: "networkidle" });
      await requester.getByRole("button", { name: "Build a release" }).click();
      const choices = requester.getByRole("dialog", { name: "Build a release" });
      await choices.getByLabel("Put the pictures in").check();
      await choices.getByLabel("Licence of the labels").selectOption("CC-BY-4.0");
      await choices.getByRole("button", { name: "Build", exact: true }).click();
      const link = requester.getByRole("link", { name: "Download" });
      await link.waitFor({ timeout: 30_000 });
      const [download] = await Promise.all([requester.waitForEvent("download"), link.click()]);
      const files = await unzip(await readFile(await download.path()));
      const manifest = files.get("manifest-sha256.txt")?.toString("utf8") ?? "";
      for (const line of manifest.trim().split("\n")) {
        const [sum = "", name = ""] = line.split("  ");
        expect(
          createHash("sha256")
            .update(files.get(name) ?? "")
            .digest("hex"),
          name,
        ).toBe(sum);
      }
      expect([...files.keys()].filter((name) => name.startsWith("data/pictures/"))).toHaveLength(12);
      const coco = [...files].find(([name]) => /coco.*\.json$/.test(name))?.[1].toString("utf8") ?? "{}";
      expectTruth(JSON.parse(coco) as Coco);

      // ---- the batch is closed, and the books balance with Stripe to the cent
      await requester.getByRole("button", { name: "Close" }).click();
      await requester.getByLabel(/Type/).fill("Pebbles and coins");
      await requester.getByRole("button", { name: "Close the batch" }).click();
      await requester.getByText("The batch is closed.").waitFor();
      await admin.goto(`${stack.url}/ledger`, { waitUntil: "networkidle" });
      await admin.getByText("It balances").waitFor();
      await admin.getByRole("button", { name: "Compare with Stripe" }).click();
      await admin.getByText("The ledger and Stripe agree to the cent.").waitFor();
      const accounts = query<{ kind: string; cents: number }>(
        "select kind, sum(balance_cents) as cents from ledger_accounts group by kind",
      );
      expect(accounts.reduce((sum, row) => sum + row.cents, 0)).toBe(0);
      expect(accounts.find((row) => row.kind === "escrow")?.cents).toBe(0);
      const escrow = query<{ kind: string; cents: number }>(
        "select p.kind as kind, sum(e.cents) as cents from ledger_entries e join ledger_postings p on p.id = e.posting_id where e.account_id = ? group by p.kind",
        `escrow:${batchId}`,
      );
      expect(escrow.reduce((sum, row) => sum + row.cents, 0)).toBe(0);
      const paid =
        query<{ cents: number }>(
          "select sum(pay_cents) as cents from submissions where batch_id = ?",
          batchId,
        )[0]?.cents ?? 0;
      expect(query<{ cents: number }>("select sum(amount_cents) as cents from payouts")[0]?.cents).toBe(paid);
    },
  );

  it(
    "leaves every screen free of axe violations and no wider than it is, at both widths and in both themes",
    { timeout: 240_000 },
    async () => {
      const [requester, annotator, , , admin] = contexts;
      if (!requester || !annotator || !admin) throw new Error("the job above did not come to its end");
      // A second batch stops halfway through its steps, so that each of them has a screen.
      const page = await requester.newPage();
      await page.goto(`${stack.url}/batches/new`, { waitUntil: "networkidle" });
      await page.getByLabel("Title").fill("Rope and floats");
      await page.getByRole("button", { name: "Go on to the pictures" }).click();
      await page.waitForURL(/\/setup\/images$/);
      await page
        .locator("input[type=file]")
        .setInputFiles([
          { name: "other.jpg", buffer: pictures[1]?.bytes ?? Buffer.alloc(0), mimeType: "image/jpeg" },
        ]);
      await page.getByRole("heading", { name: "In the batch: 1" }).waitFor({ timeout: 60_000 });
      const found: string[] = [];
      let screens = 0;
      for (const [role, context] of [
        ["visitor", await browser.newContext()],
        ["requester", requester],
        ["annotator", annotator],
        ["admin", admin],
      ] as const) {
        const look = await context.newPage();
        for (const screen of await discoverScreens(context, stack.url, role)) {
          await look.goto(stack.url + screen.path, { waitUntil: "networkidle" });
          found.push(...(await findViolations(look, screen.name)));
          screens++;
        }
        if (role === "visitor") {
          await look.goto(stack.mailUrl);
          found.push(...(await findViolations(look, "mailbox")));
          // What a person sees who comes by a link that is wrong or used up.
          for (const path of ["/reset", "/link", "/invitation", "/nowhere"]) {
            await look.goto(stack.url + path, { waitUntil: "networkidle" });
            found.push(...(await findViolations(look, path)));
          }
        }
        await look.close();
        if (role === "visitor") await context.close();
      }
      expect(found).toEqual([]);
      expect(screens).toBeGreaterThanOrEqual(26);
    },
  );
});

async function pay(page: Page, card: string): Promise<void> {
  await page.getByLabel("Card number").fill(card);
  await page.getByLabel(/Expiry/).fill("12 / 34");
  await page.getByLabel(/Security code|CVC/i).fill("123");
  await page.getByRole("button", { name: /^Pay/ }).click();
}

function query<T>(sql: string, ...values: unknown[]): T[] {
  const db = new Database(stack.databaseFile, { readonly: true });
  try {
    return db.prepare(sql).all(...values) as T[];
  } finally {
    db.close();
  }
}

function states(batchId: string): Record<string, number> {
  return Object.fromEntries(
    query<{ state: string; n: number }>(
      "select consensus_state as state, count(*) as n from images where batch_id = ? and status = 'ready' group by 1 order by 1",
      batchId,
    ).map((row) => [row.state, row.n]),
  );
}

async function waitForProposals(batchId: string): Promise<void> {
  await expect
    .poll(
      () =>
        query(
          "select 1 from images where batch_id = ? and status = 'ready' and proposal_state <> 'done'",
          batchId,
        ).length,
      { timeout: 120_000 },
    )
    .toBe(0);
}

async function claim(page: Page, batchId: string, imageId: string): Promise<DeskTask> {
  const answer = await page.request.post(`${stack.url}/api/claims`, { data: { batchId, imageId } });
  expect(answer.status()).toBe(201);
  const { claimId } = (await answer.json()) as { claimId: string };
  return (await (await page.request.get(`${stack.url}/api/claims/${claimId}`)).json()) as DeskTask;
}

/** Hands in through the desk's endpoints what a steady hand would have drawn; nonsense on the picture meant to split. */
async function handIn(
  page: Page,
  batchId: string,
  imageId: string,
  picture: TestPicture,
  who: number,
): Promise<void> {
  const task = await claim(page, batchId, imageId);
  const pebble = task.classes.find((kind) => kind.name === "pebble");
  const [dx, dy] = [
    [0, 0],
    [2, 1],
    [-1, 2],
  ][who] ?? [0, 0];
  const isSplit = picture.name === SPLIT;
  const instances = truthOf(picture.name)
    .filter((_, index) => !isSplit || who === 0 || index % 3 === who)
    .map((entry, index) => ({
      id: `s${index}`,
      classId: pebble?.id ?? "",
      shape: {
        kind: "polygon",
        rings: [
          isSplit && who > 0 ? shifted(entry.ring, 60 * who, 50) : shifted(entry.ring, dx ?? 0, dy ?? 0),
        ],
      },
      origin: "drawn",
      proposalId: null,
      crowd: false,
      occluded: false,
      truncated: false,
      note: "",
    }));
  const inside = instances.map((instance) => ({
    ...instance,
    shape: {
      ...instance.shape,
      rings: instance.shape.rings.map((ring) =>
        ring.map(([x, y]) => [Math.min(picture.width, x), Math.min(picture.height, y)]),
      ),
    },
  }));
  const answer = await page.request.post(`${stack.url}/api/claims/${task.claimId}/submission`, {
    data: { document: { instances: inside, dismissedProposalIds: [] }, activeSeconds: 60 },
  });
  expect(answer.status(), await answer.text()).toBe(201);
}

/** Draws on the desk: outlines by clicks, boxes by drags, and what the tray deals where it fits. */
async function drawByHand(
  page: Page,
  batchId: string,
  imageId: string,
  picture: TestPicture,
  who: number,
): Promise<void> {
  const task = await claim(page, batchId, imageId);
  await page.goto(`${stack.url}/desk/${task.claimId}`);
  const hands = new DeskHands(page);
  await hands.ready();
  if (who === 0) expect(await findViolations(page, "desk")).toEqual([]);
  const isCoins = picture.name === "coins.png";
  if (isCoins) await hands.press("2");
  const left = [...picture.truth];
  if (isCoins) {
    // The tray: what fits a coin is taken, what does not is sent away, a few times.
    const tray = page.getByRole("region", { name: "Tray of proposals" });
    const dealt = [...task.proposals].sort((a, b) => b.score - a.score);
    for (let turn = 0; turn < 4 && (await tray.getByRole("listitem").count()) > 0; turn++) {
      const before = await hands.count();
      const fits = dealt.find((proposal) =>
        left.some(
          (entry) =>
            shapeIou({ kind: "box", box: boxOf(proposal.shape) }, { kind: "box", box: entry.box }) > 0.75,
        ),
      );
      if (!fits) break;
      const position = await tray.getByRole("listitem").count();
      await hands.press(position > 0 ? "j" : "l");
      await expect.poll(() => hands.count()).toBe(before + 1);
      // Whatever was taken by this key is checked against the truth below; a wrong one is removed again.
      const submission = await keptDraft(page, task.claimId);
      const takenBox = boxOf(submission?.instances.at(-1)?.shape ?? { kind: "box", box: [0, 0, 1, 1] });
      const index = left.findIndex(
        (entry) => shapeIou({ kind: "box", box: takenBox }, { kind: "box", box: entry.box }) > 0.6,
      );
      if (index >= 0) left.splice(index, 1);
      else await page.keyboard.press("Control+z").then(() => hands.press("l"));
    }
  }
  for (const entry of left) {
    if (isCoins) await hands.box([entry.box[0] + who - 1, entry.box[1], entry.box[2], entry.box[3]]);
    else
      await hands.outline(
        shifted(
          entry.ring.filter((_, index) => index % 2 === 0),
          who,
          0,
        ),
      );
    await hands.press("Escape");
  }
  expect(await hands.count()).toBe(picture.truth.length);
  await page.locator("[data-save=saved]").waitFor({ timeout: 15_000 });
  await page.getByRole("button", { name: "Hand in" }).click();
  await page.getByRole("alertdialog").getByRole("button", { name: "Hand in" }).click();
  await page.getByText("Handed in.").first().waitFor();
  await page.waitForURL((url) => !url.pathname.endsWith(task.claimId));
  // The next picture was claimed at once; this test chooses its own, so that one goes back.
  const next = /desk\/([^/]+)$/.exec(new URL(page.url()).pathname)?.[1];
  if (next) await page.request.delete(`${stack.url}/api/claims/${next}`);
}

async function keptDraft(page: Page, claimId: string): Promise<DeskDocument | null> {
  await page.locator("[data-save=saved]").waitFor({ timeout: 15_000 });
  const task = (await (await page.request.get(`${stack.url}/api/claims/${claimId}`)).json()) as DeskTask;
  return task.draft;
}

function boxOf(shape: Shape): Box {
  if (shape.kind === "box") return shape.box;
  const points = shape.rings.flat();
  const xs = points.map(([x]) => x);
  const ys = points.map(([, y]) => y);
  return [
    Math.min(...xs),
    Math.min(...ys),
    Math.max(...xs) - Math.min(...xs),
    Math.max(...ys) - Math.min(...ys),
  ];
}

type Coco = {
  images: { id: number; file_name: string; width: number; height: number }[];
  categories: { id: number; name: string }[];
  annotations: {
    image_id: number;
    category_id: number;
    bbox: [number, number, number, number];
    segmentation: number[][];
    support: number;
  }[];
};

/** Every true object is in the release once, in its class, with an IoU of 0.85 or more, and nothing else is. */
function expectTruth(coco: Coco): void {
  expect(coco.images.map((image) => image.file_name).sort()).toEqual(
    pictures.map((picture) => picture.name).sort(),
  );
  const nameOf = new Map(coco.categories.map((category) => [category.id, category.name]));
  for (const image of coco.images) {
    const picture = pictures.find((candidate) => candidate.name === image.file_name);
    expect([image.width, image.height]).toEqual([picture?.width, picture?.height]);
    const labels = coco.annotations.filter((annotation) => annotation.image_id === image.id);
    expect(labels.length, image.file_name).toBe(picture?.truth.length);
    for (const entry of picture?.truth ?? []) {
      const best = Math.max(
        ...labels.map((label) => {
          if (nameOf.get(label.category_id) !== entry.kind) return 0;
          if (entry.kind === "coin")
            return shapeIou({ kind: "box", box: label.bbox }, { kind: "box", box: entry.box });
          const rings = label.segmentation.map((flat) =>
            Array.from({ length: flat.length / 2 }, (_, index): Point => [
              flat[2 * index] ?? 0,
              flat[2 * index + 1] ?? 0,
            ]),
          );
          return shapeIou({ kind: "polygon", rings }, { kind: "polygon", rings: [entry.ring] });
        }),
      );
      expect(best, `${image.file_name} ${entry.kind} at ${entry.box.join(" ")}`).toBeGreaterThan(0.8);
    }
  }
}
