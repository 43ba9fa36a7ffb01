const ENTITIES: Record<string, string> = {
  "&": "&amp;",
  "<": "&lt;",
  ">": "&gt;",
  '"': "&quot;",
  "'": "&#39;",
};

export const escapeHtml = (text: string): string =>
  text.replace(/[&<>"']/g, (character) => ENTITIES[character] ?? character);

const STYLE = `
:root{color-scheme:light dark;--paper:#ecebe4;--sheet:#fbfaf6;--ink:#22303a;--muted:#55616a;--rule:#6f7977;--line:#cfccc0;--bad:#8e3016;--good:#2f5a33;--mark:#fff3cf;--markink:#5b4300;--focus:#1d6a9e}
@media(prefers-color-scheme:dark){:root{--paper:#13181c;--sheet:#1b2227;--ink:#e6e4da;--muted:#a7b0b4;--rule:#8b959a;--line:#374148;--bad:#f2a68f;--good:#a9d3a4;--mark:#3b3110;--markink:#f2dc9b;--focus:#7cc0ea}}
*{box-sizing:border-box}html{-webkit-text-size-adjust:100%}
body{margin:0;background:var(--paper);color:var(--ink);font:16px/1.5 "Atkinson Hyperlegible Next",Verdana,"DejaVu Sans",sans-serif;font-variant-numeric:tabular-nums}
.mark{background:var(--mark);color:var(--markink);padding:.5rem 1rem;text-align:center;font-size:.9rem;border-bottom:1px solid var(--line)}
main{max-width:60rem;margin:0 auto;padding:1.5rem 1rem 4rem}.narrow{max-width:28rem}
h1{font-size:1.5rem;line-height:1.25;margin:.25rem 0 1rem;overflow-wrap:anywhere}h2{font-size:1.1rem;margin:1.75rem 0 .5rem}
.card{background:var(--sheet);border:1px solid var(--line);padding:1.25rem;border-radius:3px}
.sum{display:flex;justify-content:space-between;gap:1rem;border-bottom:1px solid var(--line);padding:.25rem 0}
label,legend{display:block;font-weight:700;margin:.75rem 0 .25rem;padding:0}fieldset{border:0;margin:0;padding:0}
input:not([type=radio]),select{width:100%;min-height:2.75rem;font:inherit;padding:.4rem .7rem;border:1px solid var(--rule);border-radius:3px;background:var(--sheet);color:var(--ink)}
input[aria-invalid=true]{border-color:var(--bad);border-width:2px}
.pair{display:grid;grid-template-columns:1fr 1fr;gap:0 1rem}.row{display:flex;flex-wrap:wrap;gap:.75rem;align-items:center;margin-top:1.25rem}
button,.button{display:inline-block;min-height:2.75rem;font:inherit;font-weight:700;padding:.5rem 1.2rem;border-radius:3px;border:1px solid var(--ink);background:var(--ink);color:var(--sheet);cursor:pointer;text-decoration:none}
.quiet{background:transparent;color:var(--ink)}a{color:inherit;text-underline-offset:.2em}
.bad{color:var(--bad);font-weight:700}.good{color:var(--good);font-weight:700}.muted{color:var(--muted)}.error{border-left:4px solid var(--bad);padding:.25rem .75rem;margin:0 0 1rem;color:var(--bad);font-weight:700}
.scroll{overflow-x:auto}table{width:100%;border-collapse:collapse}caption{text-align:left;font-weight:700;padding:.25rem 0}td,th{text-align:left;padding:.5rem .75rem .5rem 0;border-bottom:1px solid var(--line);vertical-align:top;overflow-wrap:anywhere}.num{text-align:right}.num,.keep{white-space:nowrap}
dl{display:grid;grid-template-columns:minmax(6rem,max-content) 1fr;gap:.25rem 1rem;margin:0}dt{color:var(--muted)}dd{margin:0;overflow-wrap:anywhere}
iframe{display:block;width:100%;height:30rem;border:1px solid var(--line);background:#fff}pre{white-space:pre-wrap;overflow-wrap:anywhere;font-size:.9rem;margin:0}
details{margin-top:1rem}summary{cursor:pointer;min-height:1.75rem}
:focus-visible{outline:3px solid var(--focus);outline-offset:2px}
@media(max-width:36rem){.stack thead{position:absolute;width:1px;height:1px;overflow:hidden;clip-path:inset(50%)}.stack tr{display:block;border-bottom:1px solid var(--line);padding:.5rem 0}.stack td{display:block;border:0;padding:.1rem 0;text-align:left;white-space:normal}dl{grid-template-columns:1fr}dd{margin-bottom:.5rem}}
@media(prefers-reduced-motion:no-preference){button,.button{transition:opacity .12s}}`;

/** A plain page that says plainly what it is. `body` is HTML and must be escaped by the caller. */
export function page(title: string, body: string): string {
  return `<!doctype html>
<html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1"><title>${escapeHtml(title)}, local stand-in</title><link rel="icon" href="data:,"><style>${STYLE}</style></head>
<body><aside class="mark" aria-label="Notice"><strong>Local stand-in.</strong> Nothing here leaves this machine, and no real money moves.</aside>${body}</body></html>`;
}
