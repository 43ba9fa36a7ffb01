/** The time that one stand-in lives in: the machine's, moved forward by what tests ask for. */
export class Clock {
  private aheadMs = 0;
  private frozenAtMs: number | null = null;

  nowMs = (): number => this.frozenAtMs ?? Date.now() + this.aheadMs;

  /** Unix time in whole seconds, as Stripe writes it. */
  nowSeconds = (): number => Math.floor(this.nowMs() / 1000);

  /** Moves on by so much. Time never runs backwards: balances that became available stay so. */
  advance(byMs: number): void {
    if (!(byMs >= 0)) throw new RangeError("time does not run backwards");
    if (this.frozenAtMs === null) this.aheadMs += byMs;
    else this.frozenAtMs += byMs;
  }

  /** Stops at an instant; only `advance` moves on from there. */
  freeze(atMs: number): void {
    this.frozenAtMs = atMs;
  }

  reset(): void {
    this.aheadMs = 0;
    this.frozenAtMs = null;
  }

  /** `{ advanceMs }`, `{ freezeMs }` or `{ reset: true }`, as the control endpoint takes it. */
  control(input: Record<string, unknown>): { nowMs: number } {
    if (input.reset === true) this.reset();
    if (typeof input.freezeMs === "number") this.freeze(input.freezeMs);
    if (typeof input.advanceMs === "number") this.advance(input.advanceMs);
    return { nowMs: this.nowMs() };
  }
}
