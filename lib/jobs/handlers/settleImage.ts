import { settleImage } from "@/lib/market/consensus/settleImage";
import type { Handler } from "./index";

export const settleImageJob: Handler<"consensus.settle"> = async ({ imageId }, { nowMs }) => {
  settleImage({ imageId, nowMs: nowMs() });
};
