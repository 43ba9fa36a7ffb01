import type { Reader } from "@/db/client";
import { env } from "@/lib/env";
import { enqueue } from "@/lib/jobs/queue";

export type Letter = {
  to: string;
  subject: string;
  /** Plain sentences; each becomes a paragraph. */
  lines: string[];
  action?: { label: string; path: string };
  tag: string;
};

/** Some four hours of a mail service that is not there; the keys that keep a letter single last a day. */
const ATTEMPTS_MAX = 60;

const escape = (text: string) =>
  text.replaceAll("&", "&amp;").replaceAll("<", "&lt;").replaceAll(">", "&gt;").replaceAll('"', "&quot;");

/** Puts a letter in the outbox, inside the transaction of what it tells of. */
export function post(tx: Reader, letter: Letter, nowMs: number): void {
  const link = letter.action ? new URL(letter.action.path, env().APP_URL).href : null;
  const text = [...letter.lines, ...(link ? [`${letter.action?.label}: ${link}`] : []), "Merestone"].join(
    "\n\n",
  );
  const paragraphs = letter.lines.map((line) => `<p style="margin:0 0 16px">${escape(line)}</p>`).join("");
  const button = link
    ? `<p style="margin:24px 0"><a href="${escape(link)}" style="background:#26323a;color:#f7f4ec;padding:12px 20px;text-decoration:none;border-radius:3px">${escape(letter.action?.label ?? "")}</a></p><p style="margin:0 0 16px;color:#55606a;font-size:13px">Or open ${escape(link)}</p>`
    : "";
  const html = `<!doctype html><html lang="en"><body style="margin:0;background:#f4f0e6;color:#26323a;font:16px/1.5 Verdana,sans-serif"><div style="max-width:560px;margin:0 auto;padding:32px 24px"><p style="font:600 20px Georgia,serif;margin:0 0 24px;border-bottom:1px solid #c9c2b2;padding-bottom:12px">Merestone</p>${paragraphs}${button}</div></body></html>`;
  enqueue(tx, {
    kind: "mail.send",
    payload: { to: letter.to, subject: letter.subject, html, text, tag: letter.tag },
    nowMs,
    priority: 5,
    attemptsMax: ATTEMPTS_MAX,
  });
}
