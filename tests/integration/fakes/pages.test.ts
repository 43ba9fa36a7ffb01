import { AxeBuilder } from "@axe-core/playwright";
import type { Browser, Page } from "playwright-core";
import { afterAll, beforeAll, describe, expect, it, vi } from "vitest";
import { launchBrowser } from "@/tests/support/browser";
import { clientsOf, startTestFakes, type TestFakes } from "@/tests/support/fakes";

// A browser on a busy machine takes its time.
vi.setConfig({ testTimeout: 120_000, hookTimeout: 120_000 });

let fakes: TestFakes;
let browser: Browser;
beforeAll(async () => {
  [fakes, browser] = await Promise.all([startTestFakes(), launchBrowser()]);
});
afterAll(async () => {
  await browser.close();
  await fakes.remove();
});

const session = () =>
  clientsOf(fakes).stripe.checkout.sessions.create({
    mode: "payment",
    line_items: [
      {
        quantity: 1,
        price_data: { currency: "usd", unit_amount: 12_500, product_data: { name: "Merestone wallet" } },
      },
    ],
    success_url: `${fakes.resend.url}/?search={CHECKOUT_SESSION_ID}`,
    cancel_url: `${fakes.resend.url}/?search=cancelled`,
  });

async function link() {
  const { stripe } = clientsOf(fakes);
  const { id } = await stripe.accounts.create({
    type: "express",
    email: "mara@example.com",
    capabilities: { transfers: { requested: true } },
  });
  const { url } = await stripe.accountLinks.create({
    account: id,
    refresh_url: `${fakes.resend.url}/?search=again`,
    return_url: `${fakes.resend.url}/?search=ready`,
    type: "account_onboarding",
  });
  return { id, url };
}

async function mail() {
  const url = `${fakes.stripe.url}/?magic=1`;
  const { data } = await clientsOf(fakes).resend.emails.send({
    from: "post@merestone.example",
    to: "mara@example.com",
    subject: "Sign in",
    html: `<p><a href="${url}">Sign in</a></p>`,
    text: `Sign in: ${url}`,
  });
  return `${fakes.resend.url}/mail/${data?.id}`;
}

async function fill(page: Page, card: string): Promise<void> {
  await page.getByLabel("Card number").fill(card);
  await page.getByLabel("Expiry").fill("12 / 34");
  await page.getByLabel("Security code").fill("123");
  await page.keyboard.press("Enter");
}

describe.each(["light", "dark"] as const)("in %s at 390 px", (colorScheme) => {
  it("every page fits, passes axe and says that it is a stand-in", async () => {
    const context = await browser.newContext({ viewport: { width: 390, height: 844 }, colorScheme });
    const page = await context.newPage();
    const look = async (name: string) => {
      // The letter's frame runs no script, so nothing can be asked of it; what it shows is the letter's affair.
      const { violations } = await new AxeBuilder({ page }).exclude("iframe").analyze();
      expect(violations.map(({ id, nodes }) => `${name}: ${id} ${nodes[0]?.html}`)).toEqual([]);
      expect(
        await page.evaluate(() => document.documentElement.scrollWidth - innerWidth),
        name,
      ).toBeLessThanOrEqual(0);
      expect(await page.textContent("body"), name).toContain("Local stand-in");
    };
    const { stripe } = clientsOf(fakes);
    const bank = await stripe.paymentIntents.create({
      amount: 4200,
      currency: "usd",
      payment_method: "pm_card_authenticationRequired",
      confirm: true,
      return_url: fakes.resend.url,
    });
    const onboarding = await link();
    const urls = {
      onboarding: onboarding.url,
      bank: bank.next_action?.redirect_to_url?.url,
      mail: await mail(),
      mailbox: fakes.resend.url,
      empty: `${fakes.resend.url}/?search=nobody`,
      payments: fakes.stripe.url,
      account: `${fakes.stripe.url}/accounts/${onboarding.id}`,
      checkout: (await session()).url,
    };
    for (const [name, url] of Object.entries(urls)) {
      await page.goto(url ?? "");
      await look(name);
    }
    await page.getByText("Test cards").click();
    await fill(page, "4000 0000 0000 0002");
    await page.getByRole("alert").filter({ hasText: "Your card was declined." }).waitFor();
    await look("declined");
    await context.close();
  });
});

it("a person pays after a decline and a question of the bank, by keyboard", async () => {
  const page = await browser.newPage();
  const { id, url } = await session();
  await page.goto(url ?? "");
  await fill(page, "4000 0000 0000 0002");
  await page.getByRole("alert").waitFor();
  await fill(page, "4000 0027 6000 3184");
  await page.getByRole("button", { name: "Confirm" }).press("Enter");
  await page.waitForURL((target) => target.searchParams.get("search") === id);
  expect((await clientsOf(fakes).stripe.checkout.sessions.retrieve(id)).payment_status).toBe("paid");
  await page.close();
});

it("a person cancels, onboards, and follows the link of a letter out of its frame", async () => {
  const page = await browser.newPage();
  await page.goto((await session()).url ?? "");
  await page.getByRole("link", { name: "Cancel" }).click();
  await page.waitForURL(/cancelled/);
  const onboarding = await link();
  await page.goto(onboarding.url);
  await page.getByLabel("Bank account").selectOption("000123456789");
  await page.getByRole("button", { name: "Finish onboarding" }).click();
  await page.waitForURL(/ready/);
  expect((await clientsOf(fakes).stripe.accounts.retrieve(onboarding.id)).payouts_enabled).toBe(true);
  await page.goto(await mail());
  await page.frameLocator("iframe").getByRole("link", { name: "Sign in" }).click();
  await page.waitForURL(/magic=1/);
  await page.close();
});
