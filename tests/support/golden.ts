import { existsSync, readFileSync } from "node:fs";
import path from "node:path";

export type Golden<Case> = {
  readonly header: { readonly made: string; readonly note?: string };
  readonly cases: readonly Case[];
};

const ROOT = path.resolve(import.meta.dirname, "../..");

/**
 * Published or independently computed check values: `folder/name` under tests/golden, or else the larger collection
 * beside the project. Where neither is there, the reason is printed and the list is empty, so that a
 * `describe.skipIf(cases.length === 0)` says that it skipped.
 */
export function golden<Case>(folder: string, name: string): Golden<Case> {
  const places = [
    path.join(ROOT, "tests/golden", folder, `${name}.json`),
    path.join(ROOT, "../shared/golden/engines", `${name}.json`),
  ];
  const place = places.find((candidate) => existsSync(candidate));
  if (place === undefined) {
    console.warn(
      `skipped: no check values ${name}.json in tests/golden/${folder} or ../shared/golden/engines`,
    );
    return { header: { made: "absent" }, cases: [] };
  }
  return JSON.parse(readFileSync(place, "utf8")) as Golden<Case>;
}
