import { buildRelease } from "@/lib/market/releases/buildRelease";
import type { Handler } from "./index";

export const releaseBuildJob: Handler<"release.build"> = ({ releaseId }, { nowMs, progress }) =>
  buildRelease({ releaseId, nowMs: nowMs(), progress });
