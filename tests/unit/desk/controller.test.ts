import { beforeEach, describe, expect, it } from "vitest";
import type { DeskDocument } from "@/lib/contracts/desk";
import { DeskController } from "@/lib/desk/controller";
import { DEFAULT_KEYS } from "@/lib/desk/keys";
import { ringsArea } from "@/lib/geometry/region";
import type { Point } from "@/lib/geometry/types";
import { deskTask, instance, proposal, square } from "@/tests/support/deskTask";

let counter = 0;
let saved: DeskDocument[] = [];
let clockMs = 0;

function desk(over: Parameters<typeof deskTask>[0] = {}) {
  counter = 0;
  saved = [];
  const controller = new DeskController({
    task: deskTask(over),
    newId: () => `s${++counter}`,
    onChange: (document) => saved.push(document),
    nowMs: () => clockMs,
  });
  // One screen px is one image px, origin on origin.
  controller.resize(1328, 1008);
  controller.zoom([0, 0], 1 / controller.getSketch().viewport.scale);
  const { x, y } = controller.getSketch().viewport;
  controller.pan(-x, -y);
  return controller;
}

const drag = (controller: DeskController, from: Point, to: Point, onGround = false) => {
  controller.pointerDown(from, "mouse", onGround);
  controller.pointerMove([(from[0] + to[0]) / 2, (from[1] + to[1]) / 2], "mouse");
  controller.pointerMove(to, "mouse");
  controller.pointerUp(to, "mouse");
};
const click = (controller: DeskController, at: Point) => {
  controller.pointerMove(at, "mouse");
  controller.pointerDown(at, "mouse");
  controller.pointerUp(at, "mouse");
};
const clicks = (controller: DeskController, points: readonly Point[]) =>
  points.forEach((at) => click(controller, at));
const only = (controller: DeskController) => {
  expect(controller.document.instances).toHaveLength(1);
  return controller.document.instances[0]!;
};
const two = () => ({
  instances: [instance("a", square(100, 100, 100)), instance("b", square(190, 100, 100))],
  dismissedProposalIds: [],
});

beforeEach(() => {
  clockMs = 0;
});

describe("drawing without choosing a tool", () => {
  it("makes a box of a press and drag on open ground, in either direction", () => {
    const controller = desk();
    drag(controller, [300, 200], [100, 120]);
    expect(only(controller).shape).toEqual({ kind: "box", box: [100, 120, 200, 80] });
    expect(controller.getScene().selectedId).toBe("s1");
  });

  it("draws nothing for a press that moves less than a click's slop, but sets a first point", () => {
    const controller = desk();
    drag(controller, [300, 200], [303, 202]);
    expect(controller.document.instances).toHaveLength(0);
    expect(controller.getScene().mode).toBe("plotting");
  });

  it("closes an outline on its first point, by finish, and by a double click without a doubled point", () => {
    const corner: Point[] = [
      [100, 100],
      [200, 100],
      [200, 200],
    ];
    const byFirst = desk();
    clicks(byFirst, [...corner, [102, 101]]);
    const byEnter = desk();
    clicks(byEnter, corner);
    byEnter.finish();
    const byDouble = desk();
    clicks(byDouble, [...corner, [200, 200]]);
    byDouble.doubleClick([200, 200], "mouse");
    for (const controller of [byFirst, byEnter, byDouble]) {
      expect(only(controller).shape).toEqual({ kind: "polygon", rings: [corner] });
    }
  });

  it("makes a tight box of four extreme points in a class of boxes, by the fourth click", () => {
    const controller = desk();
    controller.setClass("float");
    clicks(controller, [
      [150, 100],
      [100, 160],
      [170, 220],
      [230, 140],
    ]);
    expect(only(controller).shape).toEqual({ kind: "box", box: [100, 100, 130, 120] });
  });

  it("makes an outline that touches all four extremes' sides in a class of outlines, by one key", () => {
    const seeds: (readonly Point[])[] = [];
    const controller = desk();
    controller.setOutliner({
      fromExtremes: (_, points) => seeds.push(points),
      fromTaken: () => undefined,
      addStroke: () => undefined,
    });
    const extremes: Point[] = [
      [150, 100],
      [100, 160],
      [170, 220],
      [230, 140],
    ];
    clicks(controller, extremes);
    controller.extremes();
    const { shape } = only(controller);
    expect(shape.kind === "polygon" && shape.rings[0]?.length).toBeGreaterThanOrEqual(4);
    expect(seeds).toEqual([extremes]);
  });

  it("keeps what is drawn inside the image", () => {
    const controller = desk();
    drag(controller, [1200, 900], [1320, 1000]);
    expect(only(controller).shape).toEqual({ kind: "box", box: [1200, 900, 80, 60] });
    expect(only(controller).truncated).toBe(true);
  });

  it("keeps the points of an outline when a second finger interrupts, and drops only the press", () => {
    const controller = desk();
    clicks(controller, [
      [100, 100],
      [200, 100],
    ]);
    controller.pointerDown([300, 300], "touch");
    controller.interrupt();
    const { tool } = controller.getSketch();
    expect(tool.mode === "plotting" && tool.points).toEqual([
      [100, 100],
      [200, 100],
    ]);
  });

  it("thins a freehand stretch to the points that matter and closes it where the hand returns", () => {
    const controller = desk();
    click(controller, [300, 200]);
    controller.pointerDown([300, 201], "mouse");
    const turns = 200;
    for (let i = 1; i < turns; i++) {
      const angle = (2 * Math.PI * i) / turns;
      controller.pointerMove([200 + 100 * Math.cos(angle), 200 + 100 * Math.sin(angle)], "mouse");
    }
    controller.pointerUp([300, 198], "mouse");
    const { shape } = only(controller);
    if (shape.kind !== "polygon") throw new Error("an outline was drawn");
    expect(shape.rings[0]!.length).toBeLessThan(60);
    expect(ringsArea(shape.rings) / (Math.PI * 100 ** 2)).toBeCloseTo(1, 1);
  });

  it("refuses an outline that crosses itself, says so, and mends it by one key", () => {
    const controller = desk();
    clicks(controller, [
      [100, 100],
      [200, 200],
      [200, 100],
      [100, 200],
    ]);
    controller.finish();
    expect(controller.document.instances).toHaveLength(0);
    expect(controller.getScene().isWarning).toBe(true);
    controller.repair();
    expect(only(controller).shape.kind).toBe("polygon");
  });

  it("draws on top of a shape when told to, and else selects it", () => {
    const controller = desk({
      draft: { instances: [instance("a", square(100, 100, 400))], dismissedProposalIds: [] },
    });
    click(controller, [200, 200]);
    expect(controller.getScene().selectedId).toBe("a");
    drag(controller, [200, 200], [300, 300], true);
    expect(controller.document.instances).toHaveLength(2);
  });
});

describe("reshaping what is selected", () => {
  it("moves a vertex, adds one by dragging an edge, and removes one, each as one undo step", () => {
    const start = { instances: [instance("a", square(100, 100, 200))], dismissedProposalIds: [] };
    const controller = desk({ draft: start });
    controller.select("a");
    drag(controller, [100, 100], [80, 90]);
    drag(controller, [200, 300], [200, 330]);
    const { shape } = only(controller);
    expect(shape.kind === "polygon" && shape.rings).toEqual([
      [
        [80, 90],
        [300, 100],
        [300, 300],
        [200, 330],
        [100, 300],
      ],
    ]);
    controller.deleteAt([200, 330]);
    controller.undo();
    expect(only(controller).shape).toEqual(shape);
    controller.undo();
    controller.undo();
    expect(controller.document).toEqual(start);
  });

  it("resizes a box by a corner, by a side, and moves it by its body", () => {
    const controller = desk();
    drag(controller, [100, 100], [200, 200]);
    drag(controller, [200, 200], [250, 260]);
    expect(only(controller).shape).toEqual({ kind: "box", box: [100, 100, 150, 160] });
    drag(controller, [100, 180], [60, 180]);
    expect(only(controller).shape).toEqual({ kind: "box", box: [60, 100, 190, 160] });
    drag(controller, [150, 180], [160, 190]);
    expect(only(controller).shape).toEqual({ kind: "box", box: [70, 110, 190, 160] });
  });

  it("cancels a drag exactly", () => {
    const controller = desk({ draft: two() });
    controller.select("a");
    controller.pointerDown([100, 100], "mouse");
    controller.pointerMove([40, 40], "mouse");
    controller.cancel();
    expect(controller.document).toEqual(two());
    expect(controller.getScene().canUndo).toBe(false);
  });

  it("refuses a vertex dragged across its outline, and lets it in mended by one key", () => {
    const controller = desk({
      draft: { instances: [instance("a", square(100, 100, 200))], dismissedProposalIds: [] },
    });
    controller.select("a");
    drag(controller, [100, 100], [350, 200]);
    expect(only(controller).shape).toEqual({ kind: "polygon", rings: square(100, 100, 200) });
    expect(controller.getScene().canMend).toBe(true);
    controller.repair();
    expect(only(controller).shape).not.toEqual({ kind: "polygon", rings: square(100, 100, 200) });
  });

  it("takes presses of an arrow in a row for one step, and presses with a pause for two", () => {
    const controller = desk({ draft: two() });
    controller.select("a");
    for (let i = 0; i < 5; i++) {
      clockMs += 50;
      controller.nudge(1, 0);
    }
    clockMs += 5000;
    controller.nudge(0, 10);
    controller.undo();
    expect(controller.document.instances[0]?.shape).toEqual({
      kind: "polygon",
      rings: square(105, 100, 100),
    });
    controller.undo();
    expect(controller.document).toEqual(two());
    controller.redo();
    expect(controller.document.instances[0]?.shape).toEqual({
      kind: "polygon",
      rings: square(105, 100, 100),
    });
  });

  it("moves one point by the keyboard alone", () => {
    const controller = desk({ draft: two() });
    controller.select("a");
    controller.holdVertex(1);
    controller.holdVertex(1);
    controller.nudge(10, -10);
    const shape = controller.document.instances[0]?.shape;
    expect(shape?.kind === "polygon" && shape.rings[0]?.[1]).toEqual([210, 90]);
    controller.deleteAt(null);
    const less = controller.document.instances[0]?.shape;
    expect(less?.kind === "polygon" && less.rings[0]).toHaveLength(3);
  });
});

describe("combining shapes", () => {
  const area = (controller: DeskController, id: string) => {
    const shape = controller.find(id)?.shape;
    return shape?.kind === "polygon" ? ringsArea(shape.rings) : 0;
  };

  it("joins two shapes into one, as one step", () => {
    const controller = desk({ draft: two() });
    controller.select("a");
    controller.intend("join");
    click(controller, [250, 150]);
    expect(only(controller).id).toBe("a");
    expect(area(controller, "a")).toBeCloseTo(19_000, 6);
    controller.undo();
    expect(controller.document).toEqual(two());
  });

  it("parts a shape in two by a line, and says so when the line misses", () => {
    const controller = desk({ draft: two() });
    controller.select("a");
    controller.intend("split");
    drag(controller, [10, 10], [90, 10]);
    expect(controller.getScene().isWarning).toBe(true);
    drag(controller, [130, 50], [130, 250]);
    expect(controller.document.instances.map((entry) => entry.id)).toEqual(["a", "s1", "b"]);
    expect(area(controller, "a") + area(controller, "s1")).toBeCloseTo(10_000, 6);
    controller.undo();
    expect(controller.document).toEqual(two());
  });

  it("cuts a hole where the drawn part lies inside", () => {
    const controller = desk({ draft: two() });
    controller.select("a");
    controller.intend("hole");
    drag(controller, [120, 120], [140, 140]);
    const shape = controller.find("a")?.shape;
    expect(shape?.kind === "polygon" && shape.rings).toHaveLength(2);
    expect(area(controller, "a")).toBeCloseTo(10_000 - 400, 6);
    expect(controller.document.instances).toHaveLength(2);
  });

  it("adds what is drawn to the selected shape", () => {
    const controller = desk({ draft: two() });
    controller.select("b");
    controller.intend("extend");
    drag(controller, [280, 110], [400, 150]);
    expect(area(controller, "b")).toBeCloseTo(10_000 + 110 * 40, 6);
  });

  it("shares a border with a neighbour, without gap or overlap", () => {
    const draft = {
      instances: [instance("a", square(100, 100, 100)), instance("b", square(204, 100, 100))],
      dismissedProposalIds: [],
    };
    const controller = desk({ draft });
    controller.select("b");
    controller.shareBorder();
    const shape = controller.find("b")?.shape;
    expect(shape?.kind === "polygon" && Math.min(...shape.rings.flat().map(([x]) => x))).toBe(200);
  });
});

describe("the tray", () => {
  it("takes a proposal as it is, counts it as adjusted once touched, and deals the next", () => {
    const proposals = [
      proposal("p1", square(100, 100, 100)),
      proposal("p2", square(500, 500, 100), { score: 0.8 }),
    ];
    const controller = desk({ proposals });
    controller.take(false);
    expect(only(controller)).toMatchObject({ origin: "taken", proposalId: "p1", classId: "can" });
    expect(controller.getScene().dealt.map((entry) => entry.id)).toEqual(["p2"]);
    controller.select("s1");
    controller.nudge(1, 0);
    expect(only(controller).origin).toBe("adjusted");
    controller.sendAway();
    expect(controller.document.dismissedProposalIds).toEqual(["p2"]);
    expect(controller.getScene().dealt).toEqual([]);
    controller.undo();
    expect(controller.getScene().dealt.map((entry) => entry.id)).toEqual(["p2"]);
  });
});

describe("a box proposal that is taken in a class of outlines", () => {
  const boxed = () =>
    desk({
      proposals: [{ id: "p1", classId: "can", shape: { kind: "box", box: [10, 20, 60, 40] }, score: 0.9 }],
    });
  const takenBox = () => {
    const controller = boxed();
    const wanted: string[] = [];
    controller.setOutliner({
      fromExtremes: () => undefined,
      fromTaken: (id) => wanted.push(id),
      addStroke: () => undefined,
    });
    controller.take(false);
    return { controller, wanted, asked: only(controller).shape };
  };
  const found = { kind: "polygon", rings: square(20, 30, 25) } as const;

  it("asks for its outline by itself, and undoes the outline apart from the taking", () => {
    const { controller, wanted, asked } = takenBox();
    expect(wanted).toEqual(["s1"]);
    controller.outlineBox("s1", asked, found);
    expect(only(controller)).toMatchObject({ shape: found, origin: "taken", proposalId: "p1" });
    controller.undo();
    expect(only(controller).shape).toEqual(asked);
    controller.undo();
    expect(controller.document.instances).toEqual([]);
  });

  it("stands in by its rectangle where no outline is found, and says so", () => {
    const { controller, asked } = takenBox();
    controller.outlineBox("s1", asked, null);
    expect(only(controller).shape).toEqual({
      kind: "polygon",
      rings: [
        [
          [10, 20],
          [70, 20],
          [70, 60],
          [10, 60],
        ],
      ],
    });
    expect(controller.getScene()).toMatchObject({ isWarning: true });
  });

  it("leaves alone what was undone, changed by hand or given a class of boxes meanwhile", () => {
    const undone = takenBox();
    undone.controller.undo();
    undone.controller.outlineBox("s1", undone.asked, found);
    expect(undone.controller.document.instances).toEqual([]);

    const moved = takenBox();
    moved.controller.select("s1");
    moved.controller.nudge(5, 0);
    moved.controller.outlineBox("s1", moved.asked, found);
    expect(only(moved.controller).shape).toEqual({ kind: "box", box: [15, 20, 60, 40] });

    const reclassed = takenBox();
    reclassed.controller.select("s1");
    reclassed.controller.setClass("float");
    reclassed.controller.outlineBox("s1", reclassed.asked, found);
    expect(only(reclassed.controller).shape.kind).toBe("box");
  });

  it("is not asked about in a class of boxes", () => {
    const controller = desk({ proposals: [proposal("p1", square(10, 10, 60), { classId: "float" })] });
    controller.setOutliner({
      fromExtremes: () => undefined,
      fromTaken: () => expect.fail("a box is what this class wants"),
      addStroke: () => undefined,
    });
    controller.take(false);
    expect(only(controller).shape.kind).toBe("box");
  });
});

it("names the key that mends a crossing as this person has it", () => {
  const controller = desk();
  controller.setKeys({ ...DEFAULT_KEYS, mend: "z" });
  clicks(controller, [
    [100, 100],
    [200, 200],
    [200, 100],
    [100, 200],
  ]);
  controller.finish();
  expect(controller.getScene().message).toContain("Press Z to mend it");
});

describe("the view and the listeners", () => {
  it("tells panels nothing while the hand only moves", () => {
    const controller = desk();
    let scenes = 0;
    let sketches = 0;
    controller.subscribe(() => scenes++);
    controller.subscribeSketch(() => sketches++);
    for (let i = 0; i < 10; i++) controller.pointerMove([i, i], "mouse");
    controller.zoom([5, 5], 2);
    expect(scenes).toBe(0);
    expect(sketches).toBe(11);
  });

  it("hands each change to the keeper of the draft, at once", () => {
    const controller = desk();
    drag(controller, [10, 10], [50, 50]);
    controller.undo();
    expect(saved.map((document) => document.instances.length)).toEqual([1, 0]);
  });

  it("completes a box by the keyboard alone", () => {
    const controller = desk();
    controller.nudge(0, 0);
    controller.boxAtCursor();
    controller.nudge(40, 30);
    controller.boxAtCursor();
    const { shape } = only(controller);
    expect(shape.kind === "box" && shape.box.slice(2)).toEqual([40, 30]);
  });
});
