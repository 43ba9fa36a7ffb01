import crypto from "node:crypto";
import { syncBuiltinESMExports } from "node:module";

/** Two words that start a stream of their own: a step hands them on, so that both processes stay one history. */
export type Entropy = readonly [number, number];

/**
 * A seeded stream of numbers: sfc32 (Chris Doty-Humphrey's PractRand; constants from memory), 128 bits of state. The same
 * seed gives the same stream on every machine.
 */
export class Random {
  private a = 0;
  private b = 0;
  private c = 0;
  private d = 1;

  constructor(seed: Entropy) {
    this.reseed(seed);
  }

  reseed([low, high]: Entropy): void {
    this.a = low | 0;
    this.b = high | 0;
    this.c = 0x9e3779b9 | 0;
    this.d = 1;
    for (let round = 0; round < 12; round += 1) this.word();
  }

  /** 32 bits. */
  word(): number {
    const sum = (((this.a + this.b) | 0) + this.d) | 0;
    this.d = (this.d + 1) | 0;
    this.a = this.b ^ (this.b >>> 9);
    this.b = (this.c + (this.c << 3)) | 0;
    this.c = ((this.c << 21) | (this.c >>> 11)) + sum;
    return sum >>> 0;
  }

  /** In [0, 1). */
  next(): number {
    return this.word() / 0x1_0000_0000;
  }

  /** A whole number from `min` to `max`, both included. */
  int(min: number, max: number): number {
    return min + Math.floor(this.next() * (max - min + 1));
  }

  chance(share: number): boolean {
    return this.next() < share;
  }

  pick<T>(list: readonly T[]): T | undefined {
    return list[Math.floor(this.next() * list.length)];
  }

  /** One of the keys, by weight. */
  weighted<K extends string>(weights: Record<K, number>): K {
    const entries = Object.entries(weights) as [K, number][];
    let left = this.next() * entries.reduce((sum, [, weight]) => sum + weight, 0);
    for (const [key, weight] of entries) if ((left -= weight) < 0) return key;
    throw new RangeError("a choice has a weight");
  }

  /** Roughly normal, mean 0 and standard deviation 1: the sum of four uniform values. */
  normal(): number {
    return (this.next() + this.next() + this.next() + this.next() - 2) * Math.sqrt(3);
  }

  fork(): Entropy {
    return [this.word(), this.word()];
  }
}

/** From now on this process's random bytes, and so every id that it makes, come from the stream. */
export function seedIds(stream: Random): void {
  const bytes = (size: number): Buffer => {
    const made = Buffer.alloc(size);
    for (let at = 0; at < size; at += 1) made[at] = stream.word() & 255;
    return made;
  };
  crypto.randomBytes = bytes as typeof crypto.randomBytes;
  syncBuiltinESMExports();
}
