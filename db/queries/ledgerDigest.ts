import { createHash } from "node:crypto";
import type { Entry } from "@/lib/ledger/posting";

/** SHA-256 of a posting's entries as they are sorted, hex. */
export function digestOf(posting: readonly Entry[]): string {
  return createHash("sha256")
    .update(JSON.stringify(posting.map((e) => [e.accountId, e.cents])))
    .digest("hex");
}
