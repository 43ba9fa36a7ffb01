import type { BrowserContext } from "playwright-core";

/** One screen of the product as a signed-in person reaches it. */
export type Screen = { name: string; path: string };
export type ScreenRole = "visitor" | "requester" | "annotator" | "admin";

export const DEMO_PASSWORD = "wrack-line-2026";

export const DEMO_PEOPLE: Readonly<Record<Exclude<ScreenRole, "visitor">, string>> = {
  requester: "ines.calder@skerrow.example",
  annotator: "tomas.brandt@skerrow.example",
  admin: "ada.merrin@merestone.example",
};

/** Signs a demo person in through the sign-in screen; the context then holds the session's cookies. */
export async function signInAs(
  context: BrowserContext,
  base: string,
  role: Exclude<ScreenRole, "visitor">,
  password: string,
  email: string = DEMO_PEOPLE[role],
): Promise<void> {
  const page = await context.newPage();
  await page.goto(`${base}/sign-in`, { waitUntil: "networkidle" });
  await page.getByLabel("E-mail").first().fill(email);
  await page.getByLabel("Password").fill(password);
  await page.getByRole("button", { name: "Sign in", exact: true }).click();
  await page.waitForURL((url) => url.pathname !== "/sign-in" && url.pathname !== "/home");
  await page.close();
}

const FIXED: Readonly<Record<ScreenRole, readonly Screen[]>> = {
  visitor: [
    { name: "landing", path: "/" },
    { name: "sign-in", path: "/sign-in" },
    { name: "join", path: "/join" },
    { name: "forgot password", path: "/forgot" },
  ],
  requester: [
    { name: "batch list", path: "/batches" },
    { name: "new batch", path: "/batches/new" },
    { name: "wallet", path: "/wallet" },
    { name: "team", path: "/team" },
    { name: "account", path: "/account" },
  ],
  annotator: [
    { name: "board", path: "/board" },
    { name: "work", path: "/work" },
    { name: "earnings", path: "/earnings" },
  ],
  admin: [
    { name: "docket", path: "/docket" },
    { name: "people", path: "/people" },
    { name: "ledger", path: "/ledger" },
    { name: "payouts", path: "/payouts" },
    { name: "jobs", path: "/jobs" },
    { name: "audit", path: "/audit" },
  ],
};

/** The paths of a screen's links that fit, in the order of the screen, each once. */
async function linksOn(context: BrowserContext, base: string, from: string, fits: RegExp): Promise<string[]> {
  const page = await context.newPage();
  try {
    await page.goto(base + from, { waitUntil: "networkidle" });
    const paths = await page
      .locator("a[href]")
      .evaluateAll((links) => links.map((link) => new URL((link as HTMLAnchorElement).href).pathname));
    return [...new Set(paths)].filter((path) => fits.test(path));
  } finally {
    await page.close();
  }
}

const SETUP_STEPS = ["images", "key", "pay", "review"] as const;

/**
 * The screens of a role: the fixed ones, and those that only data makes (a batch, an image, a dispute, the
 * steps of an unfinished batch), found by following the links that a person would follow.
 */
export async function discoverScreens(
  context: BrowserContext,
  base: string,
  role: ScreenRole,
): Promise<Screen[]> {
  const screens = [...FIXED[role]];
  const follow = (from: string, fits: RegExp) => linksOn(context, base, from, fits);
  const add = (name: string, path: string | undefined) => {
    if (path) screens.push({ name, path });
  };
  if (role === "requester") {
    const draft = (await follow("/batches", /^\/batches\/[^/]+\/setup\/[^/]+$/))[0];
    if (draft) for (const step of SETUP_STEPS) add(`setup ${step}`, draft.replace(/[^/]+$/, step));
    // Newest first: the first is hardly begun, the last is the furthest on.
    const batches = await follow("/batches", /^\/batches\/(?!new$)[^/]+$/);
    add("batch newest", batches[0]);
    const oldest = batches.at(-1);
    add("batch oldest", oldest);
    for (const [name, batch] of [
      ["image newest", batches[0]],
      ["image oldest", oldest],
    ] as const)
      if (batch) add(name, (await follow(batch, /^\/batches\/[^/]+\/images\/[^/]+$/))[0]);
  }
  if (role === "annotator") add("scored work", (await follow("/work", /^\/work\/[^/]+$/))[0]);
  if (role === "admin") {
    add("dispute open", (await follow("/docket", /^\/docket\/[^/]+$/))[0]);
    add("dispute decided", (await follow("/docket?show=decided", /^\/docket\/[^/]+$/))[0]);
  }
  return screens;
}
