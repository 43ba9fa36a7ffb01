import { writeFileSync } from "node:fs";
import path from "node:path";
import { sourcesHash } from "./stack";

/** Marks the build that was just made as one of these sources, so that the start script does not repeat it. */
writeFileSync(path.join(process.cwd(), ".next", "merestone-sources"), sourcesHash());
