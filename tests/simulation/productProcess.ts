import { ProductCore } from "./productCore";
import type { FromProduct, ToProduct } from "./protocol";

/** The product in a process of its own, which kills itself at the n-th point that it comes by. */
const [file = "", secretKey = "", points = ""] = process.argv.slice(2);
let left = Number(points);
const core = new ProductCore({
  file,
  secretKey,
  say,
  point: () => {
    left -= 1;
    if (left <= 0) process.kill(process.pid, "SIGKILL");
  },
});

function say(message: FromProduct): void {
  process.send?.(message);
}

process.on("message", (message: ToProduct) => void core.take(message));
process.on("disconnect", () => process.exit(0));
say({ what: "ready" });
