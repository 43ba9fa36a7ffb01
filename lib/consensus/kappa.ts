import { invariant } from "@/lib/errors";

export type Level = "nominal" | "ordinal" | "interval" | "ratio";

/**
 * Krippendorff's alpha of `ratings[observer][unit]`, null where an observer did not rate the unit: 1 for
 * perfect agreement, 0 for what chance would give, negative below. NaN when no unit has two ratings; 1 when
 * every pairable rating is the same value (there is nothing to disagree about). O(units x values²).
 * Source: K. Krippendorff, Computing Krippendorff's Alpha-Reliability, 2011.
 */
export function krippendorffAlpha(
  ratings: readonly (readonly (number | null)[])[],
  level: Level = "nominal",
): number {
  const unitCount = Math.max(0, ...ratings.map((row) => row.length));
  const units: number[][] = [];
  for (let unit = 0; unit < unitCount; unit++) {
    const values = ratings.map((row) => row[unit] ?? null).filter((value) => value !== null);
    if (values.length >= 2) units.push(values);
  }
  const values = [...new Set(units.flat())].sort((a, b) => a - b);
  const indexOf = new Map(values.map((value, index) => [value, index]));
  const size = values.length;
  if (size === 0) return NaN;
  if (size === 1) return 1;
  const coincidence = new Float64Array(size * size);
  for (const unit of units) {
    const counts = new Float64Array(size);
    for (const value of unit) counts[indexOf.get(value)!]! += 1;
    for (let c = 0; c < size; c++) {
      if (counts[c] === 0) continue;
      for (let k = 0; k < size; k++) {
        coincidence[c * size + k]! += (counts[c]! * (counts[k]! - (c === k ? 1 : 0))) / (unit.length - 1);
      }
    }
  }
  const marginal = new Float64Array(size);
  let total = 0;
  for (let c = 0; c < size; c++) for (let k = 0; k < size; k++) marginal[c]! += coincidence[c * size + k]!;
  for (const count of marginal) total += count;
  let observed = 0;
  let expected = 0;
  for (let c = 0; c < size; c++) {
    for (let k = c + 1; k < size; k++) {
      const difference = squaredDifference(level, values, marginal, c, k);
      observed += coincidence[c * size + k]! * difference;
      expected += marginal[c]! * marginal[k]! * difference;
    }
  }
  return 1 - ((total - 1) * observed) / expected;
}

function squaredDifference(
  level: Level,
  values: readonly number[],
  marginal: Float64Array,
  c: number,
  k: number,
): number {
  const a = values[c]!;
  const b = values[k]!;
  switch (level) {
    case "nominal":
      return 1;
    case "interval":
      return (a - b) ** 2;
    case "ratio":
      return a + b === 0 ? 0 : ((a - b) / (a + b)) ** 2;
    case "ordinal": {
      let between = 0;
      for (let g = c; g <= k; g++) between += marginal[g]!;
      return (between - (marginal[c]! + marginal[k]!) / 2) ** 2;
    }
  }
}

/**
 * Fleiss' kappa of `counts[subject][category]`, every subject rated by the same number of raters (two or
 * more). NaN when chance agreement is certain. Source: J. L. Fleiss, Psychological Bulletin 76(5), 1971.
 */
export function fleissKappa(counts: readonly (readonly number[])[]): number {
  const raters = (counts[0] ?? []).reduce((sum, count) => sum + count, 0);
  invariant(raters >= 2, "two raters or more");
  const share = new Float64Array(counts[0]?.length ?? 0);
  let observed = 0;
  for (const row of counts) {
    let pairs = 0;
    let sum = 0;
    row.forEach((count, category) => {
      share[category]! += count / (counts.length * raters);
      pairs += count * (count - 1);
      sum += count;
    });
    invariant(sum === raters, "every subject has the same number of ratings");
    observed += pairs / (raters * (raters - 1) * counts.length);
  }
  let chance = 0;
  for (const p of share) chance += p * p;
  return (observed - chance) / (1 - chance);
}

export type KappaWeights = "none" | "linear" | "quadratic";

/**
 * Cohen's kappa of the square table `counts[a's category][b's category]`; weighted for ordered categories
 * (Cohen, 1960 and 1968). NaN when chance agreement is certain.
 */
export function cohenKappa(counts: readonly (readonly number[])[], weights: KappaWeights = "none"): number {
  const size = counts.length;
  invariant(size > 0 && counts.every((row) => row.length === size), "the table is square");
  const rows = counts.map((row) => row.reduce((sum, count) => sum + count, 0));
  const columns = counts.map((_, j) => counts.reduce((sum, row) => sum + row[j]!, 0));
  const total = rows.reduce((sum, count) => sum + count, 0);
  let observed = 0;
  let expected = 0;
  for (let i = 0; i < size; i++) {
    for (let j = 0; j < size; j++) {
      const gap = Math.abs(i - j);
      const weight = weights === "none" ? Number(gap > 0) : weights === "linear" ? gap : gap * gap;
      observed += weight * counts[i]![j]!;
      expected += (weight * rows[i]! * columns[j]!) / total;
    }
  }
  return 1 - observed / expected;
}
