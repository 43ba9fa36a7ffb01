import type { Page } from "playwright-core";
import type { Stack } from "./stack";

type Mail = { id: string; to: string[]; subject: string; text: string };

/** Waits for a letter to an address whose text fits, and answers with it. */
export async function waitForMail(stack: Stack, to: string, fits: RegExp, timeoutMs = 20_000): Promise<Mail> {
  const deadline = Date.now() + timeoutMs;
  while (Date.now() < deadline) {
    const answer = await fetch(`${stack.mailUrl}/api/mails?to=${encodeURIComponent(to)}`);
    const { mails } = (await answer.json()) as { mails: Mail[] };
    const found = mails.find((mail) => fits.test(mail.subject) || fits.test(mail.text));
    if (found) return found;
    await new Promise((resolve) => setTimeout(resolve, 200));
  }
  throw new Error(`no letter to ${to} fits ${fits}`);
}

export function linkIn(mail: Mail): string {
  const link = /(http:\/\/127\.0\.0\.1:\d+\/\S+)/.exec(mail.text)?.[1];
  if (!link) throw new Error(`no link in: ${mail.text}`);
  return link;
}

/** Signs a person up in the browser, by the link that comes by mail. */
export async function signUpByMail(
  page: Page,
  stack: Stack,
  person: { name: string; email: string; role: "requester" | "annotator" },
): Promise<void> {
  await page.goto(`${stack.url}/join?role=${person.role}`);
  await page.getByLabel("Name").fill(person.name);
  await page.getByLabel("E-mail").fill(person.email);
  await page.getByRole("button", { name: "Create the account" }).click();
  await page.getByText("look in your mailbox").waitFor();
  const mail = await waitForMail(stack, person.email, /Confirm your e-mail/);
  await page.goto(linkIn(mail));
  await page.getByRole("button", { name: "Sign in" }).click();
  await page.waitForURL((url) => ["/batches", "/board"].includes(url.pathname));
}

/** Signs in with a password. */
export async function signIn(page: Page, stack: Stack, email: string, password: string): Promise<void> {
  await page.goto(`${stack.url}/sign-in`);
  await page.getByLabel("E-mail").first().fill(email);
  await page.getByLabel("Password").fill(password);
  await page.getByRole("button", { name: "Sign in", exact: true }).click();
  await page.waitForURL((url) => url.pathname !== "/sign-in" && url.pathname !== "/home");
}
