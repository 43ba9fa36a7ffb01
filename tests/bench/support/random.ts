/** Seeded random numbers: the same seed gives the same scene, crowd and noise on every machine. */
export class Random {
  private state: number;

  constructor(seed: number) {
    this.state = (seed ^ 0x9e3779b9) >>> 0;
    for (let k = 0; k < 8; k++) this.next();
  }

  /** Uniform in [0, 1): mulberry32. */
  next(): number {
    this.state = (this.state + 0x6d2b79f5) >>> 0;
    let t = this.state;
    t = Math.imul(t ^ (t >>> 15), t | 1);
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61);
    return ((t ^ (t >>> 14)) >>> 0) / 4_294_967_296;
  }

  between(low: number, high: number): number {
    return low + (high - low) * this.next();
  }

  /** Whole number in [0, count). */
  below(count: number): number {
    return Math.floor(this.next() * count);
  }

  chance(probability: number): boolean {
    return this.next() < probability;
  }

  /** Standard normal (Box and Muller, 1958). */
  normal(): number {
    return Math.sqrt(-2 * Math.log(1 - this.next())) * Math.cos(2 * Math.PI * this.next());
  }

  poisson(mean: number): number {
    const limit = Math.exp(-mean);
    let count = 0;
    for (let product = this.next(); product > limit; product *= this.next()) count++;
    return count;
  }

  pick<T>(list: readonly T[]): T {
    return list[this.below(list.length)]!;
  }

  shuffled<T>(list: readonly T[]): T[] {
    const copy = [...list];
    for (let k = copy.length - 1; k > 0; k--) {
      const j = this.below(k + 1);
      [copy[k], copy[j]] = [copy[j]!, copy[k]!];
    }
    return copy;
  }
}
