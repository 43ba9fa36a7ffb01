import { readFile } from "node:fs/promises";
import path from "node:path";
import react from "@vitejs/plugin-react";
import { build, preview, type InlineConfig } from "vite";

const HERE = import.meta.dirname;
const PROJECT = path.resolve(HERE, "../../..");

type Served = { url: string; close: () => Promise<void> };

/**
 * Builds the desk alone, as for production, and serves it on 127.0.0.1 with one picture, by default the
 * photograph of coins. For measuring and for looking at states that are hard to reach in the whole product.
 */
export async function serveDesk(picture?: Buffer): Promise<Served> {
  const image = picture ?? (await readFile(path.join(PROJECT, "tests/support/photographs/coins.png")));
  const config: InlineConfig = {
    root: HERE,
    configFile: false,
    logLevel: "error",
    resolve: {
      alias: [
        { find: "next/dynamic", replacement: path.join(HERE, "dynamic.tsx") },
        { find: "@", replacement: PROJECT },
      ],
    },
    css: { postcss: PROJECT },
    worker: { format: "es" },
    define: { "process.env.NODE_ENV": '"production"' },
    build: { outDir: path.join(PROJECT, "node_modules/.cache/desk-harness"), emptyOutDir: true },
    plugins: [
      react(),
      {
        name: "picture",
        configurePreviewServer(server) {
          server.middlewares.use("/picture.png", (_request, response) => {
            response.setHeader("content-type", "image/png");
            response.end(image);
          });
        },
      },
    ],
  };
  // Vite goes by NODE_ENV, which a test runner sets to "test": React's development build would be mixed in.
  const before = process.env.NODE_ENV ?? "production";
  Object.assign(process.env, { NODE_ENV: "production" });
  try {
    await build(config);
  } finally {
    Object.assign(process.env, { NODE_ENV: before });
  }
  const server = await preview({ ...config, preview: { host: "127.0.0.1", port: 0, open: false } });
  const address = server.httpServer.address();
  if (address === null || typeof address === "string") throw new Error("the harness got no port");
  return { url: `http://127.0.0.1:${address.port}/`, close: () => server.close() };
}
