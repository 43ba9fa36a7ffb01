import { createServer, type IncomingMessage, type Server, type ServerResponse } from "node:http";

export type Call = { request: IncomingMessage; response: ServerResponse; method: string; target: string; path: string; query: URLSearchParams };

/** Serves on loopback only. A fake never runs beside real money: it refuses production unless the demo is meant. */
export function serve(port: number, handle: (call: Call) => Promise<void>): Promise<Server> {
  if (process.env.NODE_ENV === "production" && process.env.MERESTONE_DEMO !== "1") {
    throw new Error("The local stand-ins do not start in production.");
  }
  const server = createServer((request, response) => {
    const target = request.url ?? "/";
    const cut = target.indexOf("?");
    const path = cut < 0 ? target : target.slice(0, cut);
    const query = new URLSearchParams(cut < 0 ? "" : target.slice(cut + 1));
    handle({ request, response, method: request.method ?? "GET", target, path, query }).catch((error: unknown) => {
      console.error(error);
      if (!response.headersSent) response.writeHead(500, { "content-type": "text/plain" });
      response.end("internal error");
    });
  });
  return new Promise((resolve, reject) => {
    server.once("error", reject);
    server.listen(port, "127.0.0.1", () => resolve(server));
  });
}

export async function readBody(request: IncomingMessage, bytesMax = 80_000_000): Promise<Buffer> {
  const chunks: Buffer[] = [];
  let size = 0;
  for await (const chunk of request as AsyncIterable<Buffer>) {
    size += chunk.length;
    if (size > bytesMax) throw new Error("body too large");
    chunks.push(chunk);
  }
  return Buffer.concat(chunks);
}

export function sendJson(response: ServerResponse, status: number, value: unknown, headers: Record<string, string> = {}): void {
  response.writeHead(status, { "content-type": "application/json", ...headers });
  response.end(JSON.stringify(value));
}

export function sendHtml(response: ServerResponse, status: number, html: string): void {
  response.writeHead(status, { "content-type": "text/html; charset=utf-8", "x-content-type-options": "nosniff" });
  response.end(html);
}

export const escapeHtml = (text: string): string =>
  text.replaceAll("&", "&amp;").replaceAll("<", "&lt;").replaceAll(">", "&gt;").replaceAll('"', "&quot;");

/** A plain page in the colours of the product, clearly marked as a stand-in. */
export function page(title: string, body: string): string {
  return `<!doctype html><html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1"><title>${escapeHtml(title)}</title><style>
:root{color-scheme:light dark;--paper:#ecebe4;--sheet:#fbfaf6;--ink:#22303a;--muted:#56626b;--rule:#76807f;--line:#cfccc0;--bad:#8e3016;--mark:#fff3cf;--markink:#5b4300}
@media(prefers-color-scheme:dark){:root{--paper:#13181c;--sheet:#1b2227;--ink:#e6e4da;--muted:#a7b0b4;--rule:#7d878b;--line:#374148;--bad:#f2a68f;--mark:#3b3110;--markink:#f2dc9b}}
*{box-sizing:border-box}body{margin:0;background:var(--paper);color:var(--ink);font:16px/1.5 Verdana,"DejaVu Sans",sans-serif}
main{max-width:60rem;margin:0 auto;padding:1.5rem 1rem 4rem}.narrow{max-width:28rem}h1{font-size:1.5rem;margin:.5rem 0 1rem}h2{font-size:1.1rem}
.mark{background:var(--mark);color:var(--markink);padding:.5rem 1rem;text-align:center;font-size:.9rem}
.card{background:var(--sheet);border:1px solid var(--line);padding:1.25rem;border-radius:3px}
label{display:block;font-weight:700;margin:.75rem 0 .25rem}input,select{width:100%;min-height:2.75rem;font:inherit;padding:.4rem .7rem;border:1px solid var(--rule);border-radius:3px;background:var(--sheet);color:var(--ink)}
button,.button{display:inline-block;min-height:2.75rem;font:inherit;font-weight:700;padding:.5rem 1.2rem;border-radius:3px;border:1px solid var(--ink);background:var(--ink);color:var(--sheet);cursor:pointer;text-decoration:none}
.quiet{background:transparent;color:var(--ink)}a{color:inherit}.bad{color:var(--bad);font-weight:700}.muted{color:var(--muted)}
table{width:100%;border-collapse:collapse}td,th{text-align:left;padding:.5rem .5rem .5rem 0;border-bottom:1px solid var(--line);vertical-align:top;overflow-wrap:anywhere}
iframe{width:100%;min-height:26rem;border:1px solid var(--line);background:#fff}pre{white-space:pre-wrap;overflow-wrap:anywhere}:focus-visible{outline:3px solid #2f7fb8;outline-offset:2px}
</style></head><body><div class="mark">Local stand-in. Nothing here leaves this machine, and no real money moves.</div>${body}</body></html>`;
}
