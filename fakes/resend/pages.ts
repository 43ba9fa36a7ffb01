import { escapeHtml, page } from "../shared/page";
import { statusOf, type Mail } from "./mail";

const SHOWN_MAX = 200;

const when = (iso: string): string => iso.slice(0, 16).replace("T", " ");
const stateOf = (mail: Mail): string => {
  const status = statusOf(mail);
  return `<span class="${status === "delivered" ? "good" : status === "sent" ? "muted" : "bad"}">${status}</span>`;
};

/** The mailbox: every letter that was sent, newest first, by recipient. */
export function boxPage(mails: Mail[], search: string, failNext: number): string {
  const rows = mails
    .slice(0, SHOWN_MAX)
    .map(
      (mail) =>
        `<tr><td><a href="/mail/${mail.id}">${escapeHtml(mail.subject)}</a></td><td>${escapeHtml(mail.to.join(", "))}</td><td class="keep"><time datetime="${mail.createdAt}">${when(mail.createdAt)}</time></td><td class="keep">${stateOf(mail)}</td></tr>`,
    )
    .join("");
  const list =
    rows === ""
      ? `<p class="muted" style="margin:0">${search === "" ? "No letter was sent yet." : `No letter to “${escapeHtml(search)}”.`}</p>`
      : `<table class="stack"><caption>${mails.length} ${mails.length === 1 ? "letter" : "letters"}${search === "" ? "" : ` to “${escapeHtml(search)}”`}</caption><thead><tr><th scope="col">Subject</th><th scope="col">To</th><th scope="col" class="keep">Sent (UTC)</th><th scope="col">State</th></tr></thead><tbody>${rows}</tbody></table>`;
  const clear = search === "" ? "" : `<a class="button quiet" href="/">Show all</a>`;
  return page(
    "Mailbox",
    `<main><h1>Mailbox</h1><form role="search" method="get" action="/"><label for="search">Recipient</label><input id="search" type="search" name="search" value="${escapeHtml(search)}" autocomplete="off"><div class="row"><button>Search</button>${clear}</div></form>
<section class="card" style="margin-top:1.25rem" aria-label="Letters">${list}</section>
<form method="post" action="/fail-next"><div class="row"><button class="quiet">Fail the next send</button><span class="muted">${failNext > 0 ? `The next ${failNext === 1 ? "send fails" : `${failNext} sends fail`}.` : "Sends succeed."}</span></div></form></main>`,
  );
}

export function mailPage(mail: Mail): string {
  const fields: [string, string][] = [
    ["From", mail.from],
    ["To", mail.to.join(", ")],
    ["Cc", mail.cc.join(", ")],
    ["Bcc", mail.bcc.join(", ")],
    ["Reply to", mail.replyTo.join(", ")],
    ["Tags", mail.tags.map(({ name, value }) => `${name}: ${value}`).join(", ")],
    ["Idempotency key", mail.idempotencyKey ?? ""],
    [
      "Attachments",
      mail.attachments.map(({ filename, byteSize }) => `${filename} (${byteSize} bytes)`).join(", "),
    ],
    ...Object.entries(mail.headers),
  ];
  const shown = fields
    .filter(([, value]) => value !== "")
    .map(([name, value]) => `<dt>${escapeHtml(name)}</dt><dd>${escapeHtml(value)}</dd>`)
    .join("");
  const timeline = mail.events
    .map(
      ({ type, at }) =>
        `<li>${type.slice("email.".length)} <time class="muted" datetime="${at}">${when(at)} UTC</time></li>`,
    )
    .join("");
  const html =
    mail.html === ""
      ? ""
      : `<h2>The letter</h2><iframe title="The letter as the recipient sees it" sandbox="allow-top-navigation-by-user-activation allow-popups allow-popups-to-escape-sandbox" srcdoc="${escapeHtml(framed(mail))}"></iframe>`;
  const text =
    mail.text === ""
      ? ""
      : `<h2>As text</h2><pre class="card" tabindex="0" aria-label="The letter as text">${linked(mail.text)}</pre>`;
  return page(
    mail.subject,
    `<main><p><a href="/">Mailbox</a></p><h1>${escapeHtml(mail.subject)}</h1><dl class="card">${shown}</dl>${html}${text}
<h2>What became of it</h2><ol class="card" style="margin:0;padding-left:2.25rem">${timeline}</ol>
<div class="row"><form method="post" action="/mail/${mail.id}/bounce"><button class="quiet">Bounce it</button></form><form method="post" action="/mail/${mail.id}/complain"><button class="quiet">Mark as spam</button></form></div></main>`,
  );
}

/** The letter in a frame without scripts, without remote content; its links leave the frame. */
function framed({ html, subject }: Mail): string {
  const head = `<meta http-equiv="Content-Security-Policy" content="default-src 'none'; img-src data: cid: http://127.0.0.1:*; style-src 'unsafe-inline'; font-src data:"><base target="_top">`;
  if (/<head[\s>]/i.test(html)) return html.replace(/<head([^>]*)>/i, (tag) => `${tag}${head}`);
  return `<!doctype html><html lang="en"><head><title>${escapeHtml(subject)}</title>${head}<style>body{font:16px/1.5 sans-serif;margin:1rem;color:#1b1b1b;background:#fff}</style></head><body>${html}</body></html>`;
}

/** Addresses in the text as links, so that a magic link can be followed from there too. */
function linked(text: string): string {
  return text
    .split(/(https?:\/\/[^\s<>"]+)/)
    .map((piece, index) =>
      index % 2 === 1 ? `<a href="${escapeHtml(piece)}">${escapeHtml(piece)}</a>` : escapeHtml(piece),
    )
    .join("");
}
