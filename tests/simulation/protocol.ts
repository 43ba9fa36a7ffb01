import type { Entropy } from "./random";

/** What the driver's time and dice are when it speaks: the product has no clock and no dice of its own. */
type Moment = {
  nowMs: number;
  entropy: Entropy;
};

export type ToProduct = Moment &
  (
    | { what: "do"; id: number; operation: string; input: unknown }
    | { what: "answer"; id: number; answer: WireAnswer | null }
  );

/** An answer of a hosted service; null is a connection that was lost. */
export type WireAnswer = { status: number; headers: Record<string, string>; body: string };

export type WireCall = {
  service: "stripe" | "resend";
  method: string;
  target: string;
  headers: Record<string, string>;
  body: string;
};

export type Outcome =
  | { ok: true; value: unknown }
  /** `bug` is what no person and no hosted service can cause. */
  | { ok: false; why: "refused" | "upstream" | "bug"; code: string; message: string };

export type FromProduct =
  | { what: "ready" }
  | { what: "call"; id: number; call: WireCall }
  /** `wrong` is what the quick look after each operation found. */
  | { what: "done"; id: number; outcome: Outcome; wrong: string | null };
