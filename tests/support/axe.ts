import { AxeBuilder } from "@axe-core/playwright";
import type { Page } from "playwright-core";

/** The success criteria that the product promises: WCAG 2.0 to 2.2, levels A and AA. */
const TAGS = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"];

type Look = { width: number; height: number; colorScheme: "light" | "dark" };

const WIDE = { width: 1440, height: 900 } as const;
const NARROW = { width: 390, height: 844 } as const;

/** Each width and each theme once; AXE_ALL=1 takes every pair, which doubles the time. */
const LOOKS: readonly Look[] = [
  { ...WIDE, colorScheme: "light" },
  ...(process.env.AXE_ALL
    ? ([
        { ...WIDE, colorScheme: "dark" },
        { ...NARROW, colorScheme: "light" },
      ] as const)
    : []),
  { ...NARROW, colorScheme: "dark" },
];

/**
 * Looks at the page as it stands with axe. Returns one line for each violation and each sideways overflow;
 * none is what is wanted. Leaves the page at the first width, light.
 */
export async function findViolations(page: Page, name: string): Promise<string[]> {
  const found: string[] = [];
  for (const { colorScheme, ...size } of LOOKS) {
    await page.setViewportSize(size);
    await page.emulateMedia({ colorScheme, reducedMotion: "reduce" });
    await page.evaluate(() => document.fonts.ready);
    const { violations } = await new AxeBuilder({ page }).withTags(TAGS).analyze();
    for (const violation of violations)
      found.push(
        `${name} at ${size.width} ${colorScheme}: ${violation.id}: ${violation.nodes
          .slice(0, 2)
          .map((node) => node.html.slice(0, 120))
          .join(" | ")}`,
      );
    const overflowPx = await page.evaluate(
      () => document.documentElement.scrollWidth - document.documentElement.clientWidth,
    );
    if (overflowPx > 0) found.push(`${name} at ${size.width}: ${overflowPx} px wider than the screen`);
  }
  await page.setViewportSize(WIDE);
  await page.emulateMedia({ colorScheme: "light", reducedMotion: null });
  return found;
}
