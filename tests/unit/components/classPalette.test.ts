import { expect, it } from "vitest";
import { CLASS_COLOURS, classColour, classPattern } from "@/components/ui/classPalette";

it("gives the first 128 classes as many different pairs of colour and pattern", () => {
  const pairs = Array.from(
    { length: 128 },
    (_, index) => `${classColour(index + 1).hex} ${classPattern(index + 1)}`,
  );
  expect(new Set(pairs).size).toBe(128);
});

// B. Wong, "Points of view: Color blindness", Nature Methods 8, 441 (2011), prints these as RGB triples.
it("starts with the seven colours of Okabe and Ito, less black", () => {
  const published = [
    [230, 159, 0],
    [86, 180, 233],
    [0, 158, 115],
    [240, 228, 66],
    [0, 114, 178],
    [213, 94, 0],
    [204, 121, 167],
  ].map((rgb) => `#${rgb.map((channel) => channel.toString(16).padStart(2, "0")).join("")}`.toUpperCase());
  const ours = CLASS_COLOURS.slice(0, 7).map((colour) => colour.hex);
  expect(ours.toSorted()).toEqual(published.toSorted());
});

it("uses no colour twice", () => {
  expect(new Set(CLASS_COLOURS.map((colour) => colour.hex)).size).toBe(CLASS_COLOURS.length);
});
