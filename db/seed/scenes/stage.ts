import type { Camera } from "./camera";
import { Film } from "./film";
import type { Placed } from "./litter";
import type { Relief } from "./relief";

/** What is put on the ground, in order, seen from above at once and from the camera once the ground is ready. */
export class Stage {
  readonly film: Film;
  /** Class of each object by number; 0 is nobody's. */
  readonly classNames: string[] = [""];
  private readonly groups: { parts: Placed[]; owner: number }[] = [];
  readonly topAt: (x: number, y: number) => number;

  constructor(
    camera: Camera,
    readonly relief: Relief,
  ) {
    this.film = new Film(camera);
    this.topAt = (x, y) => relief.topAt(x, y);
  }

  /** Number for a further object of this class. */
  numberFor(className: string): number {
    return this.classNames.push(className) - 1;
  }

  /** Adds a thing; `className` undefined for what is no object of the key. `stops` is the light it holds back. */
  add(parts: Placed[], className?: string, stops = 1): void {
    this.addTo(parts, className === undefined ? 0 : this.numberFor(className), stops);
  }

  /** Adds a thing that belongs to an object with this number, or to none with 0. */
  addTo(parts: Placed[], owner: number, stops = 1): void {
    this.groups.push({ parts, owner });
    for (const { mesh } of parts) this.relief.add(mesh, stops);
  }

  /** Draws everything to the film; the ground must be there already. */
  draw(): void {
    for (const { parts, owner } of this.groups) this.film.draw(parts.map((part) => ({ ...part, owner })));
  }
}
