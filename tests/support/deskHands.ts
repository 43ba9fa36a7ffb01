import type { Locator, Page } from "playwright-core";
import type { Box, Point } from "@/lib/geometry/types";

/** Draws on the desk as a hand would: image px in, pointer events out. */
export class DeskHands {
  readonly stage: Locator;
  constructor(private readonly page: Page) {
    this.stage = page.locator("[data-desk-stage]");
  }

  /** Waits until the picture is painted. */
  async ready(): Promise<void> {
    await this.stage.waitFor();
    await this.page.waitForFunction(() => {
      const image = document.querySelector<HTMLImageElement>("[data-desk-stage] img");
      return image?.complete && image.naturalWidth > 0;
    });
    await this.page.waitForTimeout(150);
  }

  /** The stage's view: screen px for one image px, and where the image's corner lies on the page. */
  view(): Promise<{ scale: number; left: number; top: number }> {
    return this.stage.evaluate((element) => {
      const { scale = "1", x = "0", y = "0" } = (element as HTMLElement).dataset;
      const rect = element.getBoundingClientRect();
      return { scale: Number(scale), left: rect.x + Number(x), top: rect.y + Number(y) };
    });
  }

  /** Where an image point lies on the page, CSS px. */
  async at([x, y]: Point): Promise<{ x: number; y: number }> {
    const { scale, left, top } = await this.view();
    return { x: left + x * scale, y: top + y * scale };
  }

  async box([x, y, width, height]: Box): Promise<void> {
    const from = await this.at([x, y]);
    const to = await this.at([x + width, y + height]);
    await this.page.mouse.move(from.x, from.y);
    await this.page.mouse.down();
    await this.page.mouse.move((from.x + to.x) / 2, (from.y + to.y) / 2);
    await this.page.mouse.move(to.x, to.y);
    await this.page.mouse.up();
  }

  /** Presses and drags, and does not let go. */
  async beginBox([x, y, width, height]: Box): Promise<void> {
    const from = await this.at([x, y]);
    const to = await this.at([x + width, y + height]);
    await this.page.mouse.move(from.x, from.y);
    await this.page.mouse.down();
    await this.page.mouse.move(to.x, to.y);
  }

  async outline(ring: readonly Point[]): Promise<void> {
    for (const point of ring) {
      const at = await this.at(point);
      await this.page.mouse.click(at.x, at.y);
    }
    await this.page.keyboard.press("Enter");
  }

  async click(point: Point): Promise<void> {
    const at = await this.at(point);
    await this.page.mouse.click(at.x, at.y);
  }

  async press(key: string): Promise<void> {
    await this.page.keyboard.press(key);
  }

  /** What is drawn, by the count in the key. */
  async count(): Promise<number> {
    const texts = await this.page
      .locator("section[aria-labelledby=desk-key] .font-figures")
      .allTextContents();
    return texts.reduce((sum, text) => sum + Number.parseInt(text, 10), 0);
  }
}
