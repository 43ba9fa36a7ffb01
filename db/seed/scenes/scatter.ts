import { wrackDensity, type Beach, type Ground } from "./beach";
import { groundAt, type Camera } from "./camera";
import { LITTER, type ShoreClass } from "./classes";
import { bottle, can, cap, float } from "./litter";
import { blade, driftwood, kelp, lettuce, pebble, shell, wrack } from "./nature";
import { between, nearZero, pickWeighted, wholeBetween, type Random } from "./random";
import { rope } from "./rope";
import { settle } from "./settle";
import type { Stage } from "./stage";
import { CLOUD, ramp, tap } from "./texture";

/** Puts stones, weed and litter on the beach: a lower layer of weed, then things, then weed over some of them. */
export function scatter(
  stage: Stage,
  beach: Beach,
  camera: Camera,
  { classes, ground }: { classes: readonly ShoreClass[]; ground: Ground },
  random: Random,
): void {
  const { relief, topAt } = stage;
  const owns = (name: ShoreClass) => (classes.includes(name) ? name : undefined);
  const spotted = (accept: (x: number, y: number) => number, inset = -0.06): [number, number] => {
    for (let attempt = 0; ; attempt++) {
      const [x, y] = groundAt(
        camera,
        between(random, inset, 1 - inset) * camera.width,
        between(random, inset, 1 - inset) * camera.height,
      );
      if (beach.hasWater && beach.inland(x, y) < 3 && attempt < 200) continue;
      if (random() < accept(x, y) || attempt > 200) return [x, y];
    }
  };
  const dampAt = (x: number, y: number) => 1 - ramp(20, beach.wrackAt, beach.inland(x, y));
  const density = (x: number, y: number) => wrackDensity(beach, beach.inland(x, y), beach.along(x, y));
  const stony = (x: number, y: number) =>
    0.25 + Math.max(0, tap(CLOUD, x * 0.9 + 300, y * 0.9)) + 0.3 * density(x, y);
  const stones = ground === "shingle" ? 700 : wholeBetween(random, 40, 150);
  for (let i = 0; i < stones; i++) {
    const [x, y] = spotted(stony);
    stage.add([
      pebble(x, y, 0.3 + 3.4 * random() ** (ground === "shingle" ? 2 : 4), topAt, dampAt(x, y), random),
    ]);
  }
  for (let i = wholeBetween(random, 120, 320); i > 0; i--) {
    const [x, y] = spotted(stony);
    stage.add([pebble(x, y, between(random, 0.12, 0.4), topAt, dampAt(x, y), random)]);
  }
  for (let i = wholeBetween(random, 6, 26); i > 0; i--)
    stage.add([shell(...spotted(stony), topAt, random)], owns("shell"));
  for (
    let i = pickWeighted(
      [
        [0, 2],
        [1, 3],
        [2, 1],
      ] as const,
      random,
    );
    i > 0;
    i--
  ) {
    const [x, y] = spotted((px, py) => 0.05 + density(px, py), 0.1);
    stage.add(driftwood(x, y, topAt, random), owns("driftwood"));
  }
  const lushness = between(random, 0.55, 1.25);
  const bladeAngle = Math.PI / 2;
  const weeds = (share: number) => {
    for (let i = Math.floor(1150 * share * lushness); i > 0; i--) {
      const [x, y] = spotted((px, py) => 0.004 + density(px, py) ** 2);
      const lie = Math.atan2(
        beach.along(x, y + 1) - beach.along(x, y),
        beach.along(x + 1, y) - beach.along(x, y),
      );
      stage.add(
        blade(x, y, lie + nearZero(random) * bladeAngle + (random() < 0.5 ? Math.PI : 0), topAt, random),
      );
    }
    for (let i = Math.floor(56 * share * lushness); i > 0; i--)
      stage.add(
        wrack(
          ...spotted((px, py) => 0.006 + density(px, py) ** 1.5),
          topAt,
          between(random, 0.75, 1.25),
          random,
        ),
      );
    for (let i = Math.floor(5 * share * lushness * random() * 2); i > 0; i--)
      stage.add(kelp(...spotted((px, py) => 0.02 + density(px, py)), topAt, random), owns("kelp"));
    for (let i = Math.floor(13 * share * random()); i > 0; i--)
      stage.add(lettuce(...spotted((px, py) => 0.02 + density(px, py)), topAt, random));
  };
  weeds(0.62);
  const litter = classes.filter((name): name is (typeof LITTER)[number] =>
    LITTER.some((other) => other === name),
  );
  const laid: { x: number; y: number; radius: number }[] = [];
  const count = litter.length > 0 ? wholeBetween(random, 9, 19) : 0;
  for (let i = 0; i < count; i++) {
    const name = pickWeighted(
      [[litter[0] ?? "bottle", 1e-9], ...litter.map((kind) => [kind, SHARES[kind]] as const)],
      random,
    );
    const model = name === "rope" ? undefined : MODELS[name](random);
    const radius = model ? Math.max(model.lengthCm / 2, model.radiusCm) : 9;
    const mayTouch = random() < 0.22;
    let place: [number, number] = [0, 0];
    for (let attempt = 0; attempt < 40; attempt++) {
      place = spotted((px, py) => 0.13 + density(px, py) * 0.8, random() < 0.12 ? 0 : 0.05);
      const gap = (other: { x: number; y: number; radius: number }) =>
        Math.hypot(place[0] - other.x, place[1] - other.y) -
        (other.radius + radius) * (mayTouch ? 0.6 : 1.05);
      if (laid.every((other) => gap(other) > 0)) break;
    }
    laid.push({ x: place[0], y: place[1], radius });
    if (!model) stage.add(rope({ x: place[0], y: place[1], topAt }, random), "rope");
    else stage.add(settle(model, name === "cap", place, relief, random), name, model.stops);
  }
  weeds(0.26);
  // A frond or a blade over some of the things, so that they are seen in part, as on a beach.
  for (const { x, y, radius } of laid) {
    if (radius < 3 || random() > 0.5) continue;
    const [px, py] = [x + nearZero(random) * radius, y + nearZero(random) * radius];
    if (random() < 0.6) stage.add(wrack(px, py, topAt, between(random, 0.6, 0.95), random));
    else
      for (let i = 0; i < 5; i++)
        stage.add(
          blade(px + nearZero(random) * 4, py + nearZero(random) * 4, random() * 6.283, topAt, random),
        );
  }
}

const SHARES = { bottle: 0.27, cap: 0.22, rope: 0.17, float: 0.15, can: 0.19 } as const;
const MODELS = { bottle, cap, can, float } as const;
