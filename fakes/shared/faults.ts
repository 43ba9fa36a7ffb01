import { setTimeout as sleep } from "node:timers/promises";
import type { Answer, Call } from "./transport";

/**
 * What goes wrong on purpose. `before` acts instead of the operation, `inside` fails it after it began (so that
 * an idempotency key keeps the failure), `after` loses or spoils the answer of an operation that was done.
 */
export type Fault = {
  /** "POST /v1/transfers": the request line up to here must agree; empty matches everything. */
  match: string;
  when: "before" | "inside" | "after";
  action: "status" | "drop" | "delay";
  status: number;
  delayMs: number;
  timesLeft: number;
  headers: Record<string, string>;
};

const WHENS = ["before", "inside", "after"] as const;
const ACTIONS = ["status", "drop", "delay"] as const;

export class Faults {
  private list: Fault[] = [];

  /** Adds a fault, or clears all with `{ clear: true }`. Throws RangeError on an unknown word. */
  control(input: Record<string, unknown>): { faults: Fault[] } {
    if (input.clear === true) this.list = [];
    if (input.action !== undefined) {
      const when = WHENS.find((word) => word === (input.when ?? "before"));
      const action = ACTIONS.find((word) => word === input.action);
      if (!when || !action)
        throw new RangeError(`when is one of ${WHENS.join(", ")}; action one of ${ACTIONS.join(", ")}`);
      this.list.push({
        match: String(input.match ?? ""),
        when,
        action,
        status: Number(input.status ?? 500),
        delayMs: Number(input.delayMs ?? 1000),
        timesLeft: Number(input.times ?? 1),
        headers: input.retryAfter === undefined ? {} : { "retry-after": String(input.retryAfter) },
      });
    }
    return { faults: this.list };
  }

  /** Uses up the first fault that fits, waits for a delay, and returns what remains to be done. */
  async strike(call: Call, when: Fault["when"]): Promise<Fault | undefined> {
    const line = `${call.method} ${call.path}`;
    const fault = this.list.find(
      (entry) => entry.when === when && entry.timesLeft > 0 && line.startsWith(entry.match),
    );
    if (!fault) return undefined;
    fault.timesLeft -= 1;
    if (fault.timesLeft <= 0) this.list = this.list.filter((entry) => entry !== fault);
    if (fault.action !== "delay") return fault;
    await sleep(fault.delayMs);
    return undefined;
  }
}

export const dropped: Answer = { status: 0, dropped: true };
