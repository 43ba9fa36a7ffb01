/** How the inside of a class's shapes is marked, so that classes differ without colour. */
export type PatternName =
  "solid" | "rising" | "falling" | "dots" | "crossed" | "level" | "upright" | "checked";

export type ClassColour = { name: string; hex: string };

/**
 * Colours for the classes of a key, in the order in which they are given out. The first seven are Okabe and
 * Ito's, less black (M. Okabe, K. Ito, "Color Universal Design", 2008; printed with these values by B. Wong,
 * Nature Methods 8, 441, 2011), in an order of ours. The
 * other nine are the "muted" qualitative scheme of P. Tol ("Colour Schemes", SRON/EPS/TN/09-002, 3.2, 2021).
 */
export const CLASS_COLOURS: readonly ClassColour[] = [
  { name: "vermillion", hex: "#D55E00" },
  { name: "sky blue", hex: "#56B4E9" },
  { name: "bluish green", hex: "#009E73" },
  { name: "yellow", hex: "#F0E442" },
  { name: "reddish purple", hex: "#CC79A7" },
  { name: "blue", hex: "#0072B2" },
  { name: "orange", hex: "#E69F00" },
  { name: "indigo", hex: "#332288" },
  { name: "rose", hex: "#CC6677" },
  { name: "teal", hex: "#44AA99" },
  { name: "sand", hex: "#DDCC77" },
  { name: "wine", hex: "#882255" },
  { name: "cyan", hex: "#88CCEE" },
  { name: "green", hex: "#117733" },
  { name: "olive", hex: "#999933" },
  { name: "purple", hex: "#AA4499" },
];

const PATTERNS: readonly PatternName[] = [
  "solid",
  "rising",
  "dots",
  "falling",
  "crossed",
  "level",
  "checked",
  "upright",
];

/**
 * Colour of class `number` (1, 2, 3, ...). After sixteen the colours come round again; a pattern shift keeps the
 * pair of colour and pattern apart up to 128 classes, and the number is always shown.
 */
export function classColour(number: number): ClassColour {
  return pick(CLASS_COLOURS, number - 1);
}

/** Pattern of class `number`; see classColour. */
export function classPattern(number: number): PatternName {
  const round = Math.floor((number - 1) / CLASS_COLOURS.length);
  return pick(PATTERNS, number - 1 + round);
}

/** Black or white, whichever stands out more from `hex` (contrast ratio of WCAG 2.2). */
export function inkOn(hex: string): "#000000" | "#ffffff" {
  const luminance = relativeLuminance(hex);
  return (luminance + 0.05) ** 2 > 1.05 * 0.05 ? "#000000" : "#ffffff";
}

/** Contrast ratio of two `#rrggbb` colours, 1 to 21, as WCAG 2.2 defines it. */
export function contrastRatio(one: string, other: string): number {
  const [a, b] = [relativeLuminance(one), relativeLuminance(other)];
  return (Math.max(a, b) + 0.05) / (Math.min(a, b) + 0.05);
}

/**
 * Relative luminance of a `#rrggbb` colour, 0 to 1: WCAG 2.2, "relative luminance", with the sRGB threshold
 * 0.04045 to which W3C corrected it.
 */
export function relativeLuminance(hex: string): number {
  if (!/^#[0-9a-f]{6}$/i.test(hex)) throw new RangeError(`${hex} is not a #rrggbb colour`);
  const linear = (start: number) => {
    const channel = Number.parseInt(hex.slice(start, start + 2), 16) / 255;
    return channel <= 0.04045 ? channel / 12.92 : ((channel + 0.055) / 1.055) ** 2.4;
  };
  return 0.2126 * linear(1) + 0.7152 * linear(3) + 0.0722 * linear(5);
}

function pick<T>(list: readonly T[], index: number): T {
  const found = list[((index % list.length) + list.length) % list.length];
  if (found === undefined) throw new RangeError(`no entry ${index} in a list of ${list.length}`);
  return found;
}
