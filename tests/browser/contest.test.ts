import { readFile } from "node:fs/promises";
import type { Browser, BrowserContext, Page } from "playwright-core";
import { afterAll, beforeAll, describe, expect, it } from "vitest";
import { openDatabase, setDb, type Db } from "@/db/client";
import { ledgerViolations } from "@/db/queries/ledger";
import { topUpWallet } from "@/db/seed/batches";
import type { Actor } from "@/lib/auth/actor";
import { hashPassword } from "@/lib/auth/password";
import { stackEnv } from "@/lib/cli/stack";
import { settleImage } from "@/lib/market/consensus/settleImage";
import { ensureBucket, putObject } from "@/lib/services/store";
import { centsOf, isAmount, textsOf } from "../integration/money/pdfText";
import { launchBrowser } from "../support/browser";
import { pebblePicture, type TestPicture } from "../support/jobPictures";
import { cents, classId, draftBatch, drawing, imagesOf, person, publish, team } from "../support/market";
import { signIn, waitForMail } from "../support/people";
import { startStack, type Stack } from "../support/stack";
import { claimTask } from "@/lib/market/work/claimTask";
import { submitWork } from "@/lib/market/work/submitWork";

/**
 * A score is contested, decided, appealed and decided by another admin, each by its own person in the browser;
 * then the statement and the receipt are opened as PDF and added up against the ledger. What comes before the
 * contest is made by use cases on the same database.
 */
const PASSWORD = "a long enough password";
const CONTEST = "I drew the sixth pebble as well; the other person left it out.";
const FIRST = "The agreement has five pebbles, and the brief asks for what both can see.";
const APPEAL = "The sixth pebble lies in the open. The brief asks for every pebble, so it must count.";
const SECOND = "All six pebbles are plain to see and the brief asks for every one: this drawing is right.";

let stack: Stack;
let browser: Browser;
let db: Db;
let picture: TestPicture;
let owner: Actor;
let teamId: string;
let batchId: string;
let ada: Actor;
let edda: Actor;
let tomas: Actor;
let maren: Actor;
const contexts: BrowserContext[] = [];

beforeAll(async () => {
  [stack, browser, picture] = await Promise.all([
    startStack(),
    launchBrowser(),
    pebblePicture("pole-000.png", 41),
  ]);
  Object.assign(process.env, stackEnv(stack.plan), { NODE_ENV: "test", LOG_LEVEL: "silent" });
  db = openDatabase(stack.databaseFile);
  setDb(db);
  const passwordHash = await hashPassword(PASSWORD);
  const named = (role: "requester" | "annotator" | "admin", name: string) =>
    person(db, role, { name, passwordHash });
  [owner, ada, edda] = [
    named("requester", "Ines Calder"),
    named("admin", "Ada Merrin"),
    named("admin", "Edda Rook"),
  ];
  [tomas, maren] = [named("annotator", "Tomas Brandt"), named("annotator", "Maren Holt")];
  teamId = team(db, owner);
  const nowMs = Date.now() - 30 * 60_000;
  await topUpWallet({ actor: owner, teamId, amountCents: 2500, nowMs });
  batchId = draftBatch(db, owner, teamId, { imageCount: 1, agreementTarget: 0.5, nowMs });
  const [image] = imagesOf(db, batchId);
  await ensureBucket();
  await putObject(image?.workingKey ?? "", picture.bytes, "image/jpeg");
  publish(db, owner, batchId, nowMs);
  const pebbles = picture.truth.map(({ box }) => box);
  draw(tomas, pebbles, 0);
  draw(maren, pebbles.slice(0, 5), 1);
  settleImage({ imageId: image?.id ?? "", nowMs: nowMs + 10 * 60_000 });

  function draw(actor: Actor, boxes: typeof pebbles, hand: number): void {
    const claim = claimTask({ actor, nowMs, batchId, imageId: image?.id });
    // Two people's hands: the same objects, a few px apart and of slightly other size.
    const own = boxes.map(([x, y, w, h]): [number, number, number, number] => [
      Math.max(0, x + 4 * hand),
      y,
      w - 3 * hand,
      h - 5 * hand,
    ]);
    const document = drawing(classId(db, batchId, "bottle"), own);
    submitWork({ actor, nowMs: nowMs + 120_000, claimId: claim.id, document, activeSeconds: 90 });
  }
});

afterAll(async () => {
  await Promise.all(contexts.map((context) => context.close()));
  await browser?.close();
  db?.$client.close();
  await stack?.stop();
});

async function pageOf(actor: Actor): Promise<Page> {
  const context = await browser.newContext({ viewport: { width: 1440, height: 900 }, acceptDownloads: true });
  context.setDefaultTimeout(20_000);
  contexts.push(context);
  const page = await context.newPage();
  await signIn(page, stack, actor.email, PASSWORD);
  return page;
}

const dialogOf = (page: Page) => page.getByRole("alertdialog");

async function download(page: Page, link: string | RegExp): Promise<string[]> {
  const [file] = await Promise.all([
    page.waitForEvent("download"),
    page.getByRole("link", { name: link }).first().click(),
  ]);
  return textsOf(await readFile(await file.path()));
}

describe("a contested score", () => {
  it(
    "is decided, appealed, decided by another admin, and stands corrected in the statement to the cent",
    { timeout: 120_000 },
    async () => {
      // ---- the annotator contests
      const annotator = await pageOf(tomas);
      await annotator.goto(`${stack.url}/work`, { waitUntil: "networkidle" });
      await annotator.getByRole("link", { name: "pole-000.png" }).click();
      await annotator.getByText("$0.20").first().waitFor(); // base 5 and five agreed boxes at 3 cents
      await annotator.waitForLoadState("networkidle");
      await annotator.getByRole("button", { name: "Contest the score" }).click();
      await dialogOf(annotator).getByLabel("What is wrong").selectOption("missing");
      await dialogOf(annotator).getByLabel("Class").selectOption({ label: "1 bottle" });
      await dialogOf(annotator).getByRole("button", { name: "Contest it" }).click();
      await dialogOf(annotator)
        .getByText(/Say in a sentence what is wrong/)
        .waitFor();
      await dialogOf(annotator).getByLabel("Your reason").fill(CONTEST);
      await dialogOf(annotator).getByRole("button", { name: "Contest it" }).click();
      await annotator.getByText("On the docket: object left out").waitFor();

      // ---- one admin decides, on evidence that is shown with its hash
      const admin = await pageOf(ada);
      await admin.goto(`${stack.url}/docket`, { waitUntil: "networkidle" });
      await admin.getByRole("link", { name: "pole-000.png" }).click();
      await admin.getByText("unchanged since").waitFor();
      await admin.getByText(CONTEST).waitFor();
      await admin.getByRole("heading", { name: "The brief, version 1, as it was shown" }).waitFor();
      await admin.waitForLoadState("networkidle");
      const firstId = new URL(admin.url()).pathname.split("/").pop() ?? "";
      await decide(admin, FIRST);
      await admin.getByText("Decided: kept as it was, by Ada Merrin").waitFor();
      for (const who of [tomas, owner]) {
        const mail = await waitForMail(stack, who.email, /Decided: pole-000/);
        expect(mail.text).toContain(FIRST);
      }

      // ---- the annotator appeals; the first admin cannot take it
      await annotator.reload({ waitUntil: "networkidle" });
      await annotator.getByText(FIRST).waitFor();
      await annotator.getByRole("button", { name: "Appeal the decision" }).click();
      await dialogOf(annotator)
        .getByLabel(/What is wrong with the decision/)
        .fill(APPEAL);
      await dialogOf(annotator).getByRole("button", { name: "Appeal", exact: true }).click();
      await annotator.getByText(/An appeal is on the docket/).waitFor();
      await admin.goto(`${stack.url}/docket`, { waitUntil: "networkidle" });
      await admin.getByText("for another admin").waitFor();
      await admin.getByRole("link", { name: "pole-000.png" }).click();
      await admin.getByText("You decided the first instance; another admin decides it now.").waitFor();
      expect(await admin.getByRole("button", { name: "Decide" }).count()).toBe(0);

      // ---- another admin decides the appeal, citing the first
      const other = await pageOf(edda);
      await other.goto(`${stack.url}/docket`, { waitUntil: "networkidle" });
      await other.getByRole("link", { name: "pole-000.png" }).click();
      await other.getByText(APPEAL).waitFor();
      await other.waitForLoadState("networkidle");
      await other.getByLabel(/what Tomas Brandt drew/).check();
      await other.getByLabel("pole-000.png: kept as it was").check();
      await decide(other, SECOND);
      await other.getByText(/Decided: one submission picked, that of Tomas Brandt, by Edda Rook/).waitFor();
      await other.getByText("cited").waitFor();
      await other.goto(`${stack.url}/docket/${firstId}`);
      await other.getByRole("link", { name: "See the appeal" }).waitFor();

      // ---- the annotator sees the new pay, and the statement adds up to the ledger
      await annotator.reload({ waitUntil: "networkidle" });
      await annotator.getByText("Decided on appeal: one submission picked").waitFor();
      await annotator.getByText("$0.23").first().waitFor();
      expect(await annotator.getByRole("button", { name: /Appeal|Contest/ }).count()).toBe(0);
      await annotator.goto(`${stack.url}/earnings`, { waitUntil: "networkidle" });
      const statement = await download(annotator, "PDF");
      expect(statement).toContain("Pay corrected by a decision");
      const [opening = 0, ...rest] = statement.filter(isAmount).map(centsOf);
      const [moved = 0, closing = 0] = rest.slice(-2);
      const lines = rest.slice(0, -2).filter((_cents, index) => index % 2 === 0); // each with its balance
      expect(lines).toContain(3);
      expect(opening + lines.reduce((sum, line) => sum + line, 0)).toBe(closing);
      expect(closing - opening).toBe(moved);
      expect(closing).toBe(23);
      expect(closing).toBe(cents(db, "payable", tomas.id));
      expect(cents(db, "payable", maren.id)).toBe(20);

      // ---- the annotator lets payouts come by themselves; the choice stays on the screen and is kept
      await annotator.getByRole("radio", { name: /every week/ }).check();
      await annotator.getByLabel("Day of the week").selectOption({ label: "Wednesday" });
      await annotator.getByRole("button", { name: "Keep this" }).click();
      await annotator.getByText(/Next on .*, if there is \$5\.00 or more/).waitFor();
      for (const look of ["at once", "after a reload"]) {
        expect(await annotator.getByRole("radio", { name: /every week/ }).isChecked(), look).toBe(true);
        expect(await annotator.getByLabel("Day of the week").inputValue(), look).toBe("3");
        await annotator.reload({ waitUntil: "networkidle" });
      }

      // ---- the requester reads the reason; receipt and invoice add up to the ledger
      const requester = await pageOf(owner);
      const [image] = imagesOf(db, batchId);
      await requester.goto(`${stack.url}/batches/${batchId}/images/${image?.id}`);
      await requester.getByText(SECOND).waitFor();
      await requester.goto(`${stack.url}/wallet`, { waitUntil: "networkidle" });
      await requester.getByText("Receipts and statements").click();
      const [paid, sum] = (await download(requester, "Receipt (PDF)")).filter(isAmount).map(centsOf);
      expect([paid, sum]).toEqual([2500, 2500]);
      const invoice = await requester.request.get(`${stack.url}/api/papers/invoice?batchId=${batchId}`);
      const [pay = 0, fee = 0, billed, held = 0, returned = 0, left = 0] = textsOf(await invoice.body())
        .filter(isAmount)
        .map(centsOf);
      expect([pay, fee]).toEqual([23 + 20, 3 + 3]); // 15 % of 23 and of 20 cents, each floored
      expect(billed).toBe(pay + fee);
      expect(held).toBe(pay + fee + returned + left);
      expect(left).toBe(cents(db, "escrow", batchId));
      expect((sum ?? 0) - held).toBe(cents(db, "wallet", teamId));
      expect(ledgerViolations(db)).toEqual([]);
    },
  );
});

async function decide(page: Page, reason: string): Promise<void> {
  await page.getByRole("textbox", { name: "Reason" }).fill(reason);
  await page.getByRole("button", { name: "Decide" }).click();
  await dialogOf(page).getByRole("button", { name: "Decide" }).click();
}
