import fc from "fast-check";
import { describe, expect, it } from "vitest";
import type { DeskDocument } from "@/lib/contracts/desk";
import { DeskDocument as DeskDocumentSchema } from "@/lib/contracts/desk";
import { DeskController } from "@/lib/desk/controller";
import { apply, type Command } from "@/lib/desk/document";
import { historyOf, perform, redo, undo } from "@/lib/desk/history";
import { bounds, problemOfRings } from "@/lib/desk/shapes";
import type { Point } from "@/lib/geometry/types";
import { deskTask, instance, proposal, SIZE, square } from "@/tests/support/deskTask";

const ids = fc.constantFrom("a", "b", "c", "d", "e");
const proposalIds = fc.constantFrom("p1", "p2", "p3");
const shapes = fc.tuple(
  fc.integer({ min: 0, max: 800 }),
  fc.integer({ min: 0, max: 800 }),
  fc.integer({ min: 3, max: 90 }),
);

const leaf: fc.Arbitrary<Command> = fc.oneof(
  fc.record({
    type: fc.constant("add" as const),
    instance: fc.tuple(ids, shapes).map(([id, [x, y, side]]) => instance(id, square(x, y, side))),
    index: fc.nat({ max: 6 }),
  }),
  fc.record({ type: fc.constant("remove" as const), id: ids }),
  fc.record({
    type: fc.constant("change" as const),
    id: ids,
    to: fc.oneof(
      fc.record({ note: fc.string({ maxLength: 3 }) }),
      fc.record({ crowd: fc.boolean(), classId: fc.constantFrom("can", "float") }),
      shapes.map(([x, y, side]) => ({ shape: { kind: "polygon" as const, rings: square(x, y, side) } })),
    ),
  }),
  fc.record({ type: fc.constant("dismiss" as const), proposalId: proposalIds }),
  fc.record({ type: fc.constant("restore" as const), proposalId: proposalIds }),
);
const commands: fc.Arbitrary<Command> = fc.oneof(
  { weight: 4, arbitrary: leaf },
  {
    weight: 1,
    arbitrary: fc.record({ type: fc.constant("all" as const), commands: fc.array(leaf, { maxLength: 4 }) }),
  },
);

const EMPTY: DeskDocument = { instances: [], dismissedProposalIds: [] };

describe("the document", () => {
  it("is exactly as before after a command and its inverse, in 10,000 random sequences", () => {
    fc.assert(
      fc.property(fc.array(commands, { maxLength: 20 }), (list) => {
        let document = EMPTY;
        for (const command of list) {
          const { document: next, inverse } = apply(document, command);
          expect(apply(next, inverse).document).toEqual(document);
          document = next;
        }
      }),
      { numRuns: 10_000 },
    );
  });

  it("returns to the first document by undo and to the last by redo, in 10,000 random sequences", () => {
    fc.assert(
      fc.property(fc.array(commands, { maxLength: 20 }), (list) => {
        let history = historyOf(EMPTY);
        for (const command of list) history = perform(history, command);
        const last = history.document;
        const steps = history.undoable.length;
        for (let i = 0; i < steps; i++) history = undo(history);
        expect(history.document).toEqual(EMPTY);
        for (let i = 0; i < steps; i++) history = redo(history);
        expect(history.document).toEqual(last);
      }),
      { numRuns: 10_000 },
    );
  });
});

/** Everything that a hand or keyboard can do, as data. Coarse places, so that shapes meet and touch. */
const place = fc
  .tuple(fc.integer({ min: -2, max: 22 }), fc.integer({ min: -2, max: 18 }))
  .map(([x, y]): Point => [x * 61, y * 59]);
const deeds = fc.oneof(
  { weight: 4, arbitrary: fc.record({ do: fc.constant("click" as const), at: place }) },
  {
    weight: 4,
    arbitrary: fc.record({ do: fc.constant("drag" as const), at: place, to: place, over: fc.boolean() }),
  },
  {
    weight: 6,
    arbitrary: fc.record({
      do: fc.constantFrom(
        "finish",
        "extremes",
        "cancel",
        "mend",
        "undo",
        "redo",
        "next",
        "vertex",
        "delete",
        "nudge",
        "duplicate",
        "take",
        "adjust",
        "away",
        "extend",
        "hole",
        "split",
        "join",
        "share",
        "float",
        "can",
        "interrupt",
        "point",
        "box",
      ),
      at: place,
    }),
  },
);
type Deed = { do: string; at?: Point; to?: Point; over?: boolean };

function act(controller: DeskController, deed: Deed): void {
  const at = deed.at ?? [0, 0];
  switch (deed.do) {
    case "click":
      controller.pointerDown(at, "mouse");
      return controller.pointerUp(at, "mouse");
    case "drag": {
      const to = deed.to ?? at;
      controller.pointerDown(at, "mouse", deed.over ?? false);
      controller.pointerMove([(at[0] + to[0]) / 2, (at[1] + to[1]) / 2 + 9], "mouse");
      controller.pointerMove(to, "mouse");
      return controller.pointerUp(to, "mouse");
    }
    case "finish":
      return controller.finish();
    case "extremes":
      return controller.extremes();
    case "cancel":
      return controller.cancel();
    case "mend":
      return controller.repair();
    case "undo":
      return controller.undo();
    case "redo":
      return controller.redo();
    case "next":
      return controller.selectNext(1);
    case "vertex":
      return controller.holdVertex(1);
    case "delete":
      return controller.deleteAt(at);
    case "nudge":
      return controller.nudge(at[0] / 10 - 40, at[1] / 10 - 40);
    case "duplicate":
      return controller.duplicate();
    case "take":
      return controller.take(false);
    case "adjust":
      return controller.take(true);
    case "away":
      return controller.sendAway();
    case "extend":
    case "hole":
    case "split":
    case "join":
      return controller.intend(deed.do);
    case "share":
      return controller.shareBorder();
    case "float":
    case "can":
      return controller.setClass(deed.do);
    case "interrupt":
      return controller.interrupt();
    case "point":
      return controller.plotAtCursor();
    case "box":
      return controller.boxAtCursor();
  }
}

describe("the desk under any hand", () => {
  it("never holds an invalid shape, and undoes all of it to the first document", () => {
    const proposals = [proposal("p1", square(120, 120, 130)), proposal("p2", square(500, 300, 99))];
    fc.assert(
      fc.property(fc.array(deeds, { minLength: 5, maxLength: 60 }), (list) => {
        let counter = 0;
        let clockMs = 0;
        const start = {
          instances: [instance("a", square(61, 59, 244)), instance("b", square(305, 59, 183))],
          dismissedProposalIds: [],
        };
        const controller = new DeskController({
          task: deskTask({ draft: start, proposals }),
          newId: () => `s${++counter}`,
          onChange: () => undefined,
          nowMs: () => (clockMs += 300),
        });
        for (const deed of list) {
          act(controller, deed);
          for (const { id, shape } of controller.document.instances) {
            const [x, y, width, height] = bounds(shape);
            expect(
              x >= 0 && y >= 0 && x + width <= SIZE.width + 1e-9 && y + height <= SIZE.height + 1e-9,
              id,
            ).toBe(true);
            if (shape.kind === "polygon")
              expect(problemOfRings(shape.rings), JSON.stringify(shape)).toBeUndefined();
          }
        }
        expect(() => DeskDocumentSchema.parse(controller.document)).not.toThrow();
        controller.cancel();
        for (let i = 0; i <= list.length * 2 && controller.getScene().canUndo; i++) controller.undo();
        expect(controller.document).toEqual(start);
      }),
      { numRuns: 600 },
    );
  });
});
