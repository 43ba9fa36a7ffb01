import { checkImage } from "@/lib/market/images/checkImage";
import type { Handler } from "./index";

export const checkImageJob: Handler<"image.check"> = ({ imageId }, { nowMs }) =>
  checkImage({ imageId, nowMs: nowMs() });
