import { inflateSync } from "node:zlib";

/**
 * The texts of a PDF in the order in which they are drawn. Reads content streams compressed by Flate with texts
 * as hexadecimal strings (ISO 32000-1, 7.3.4.3 and 9.4.3), which is what pdf-lib writes for standard fonts.
 */
export function textsOf(bytes: Uint8Array): string[] {
  const file = Buffer.from(bytes);
  const texts: string[] = [];
  for (let at = file.indexOf("stream\n"); at >= 0; at = file.indexOf("stream\n", at + 1)) {
    if (file.subarray(at - 3, at).toString("latin1") === "end") continue;
    const end = file.indexOf("\nendstream", at);
    let content: string;
    try {
      content = inflateSync(file.subarray(at + "stream\n".length, end)).toString("latin1");
    } catch {
      continue; // not compressed: no page's content
    }
    for (const [, hex = ""] of content.matchAll(/<([0-9A-F]*)> Tj/g))
      texts.push(Buffer.from(hex, "hex").toString("latin1"));
  }
  return texts;
}

/** Cents of an amount as the papers write it: "-$1,234.56" is -123456. */
export function centsOf(text: string): number {
  const found = /^(-?)\$([\d,]+)\.(\d\d)$/.exec(text);
  if (!found) throw new Error(`no amount: ${text}`);
  const [, sign, whole = "", fraction = ""] = found;
  return Number(`${sign}${whole.replaceAll(",", "")}${fraction}`);
}

export const isAmount = (text: string): boolean => /^-?\$[\d,]+\.\d\d$/.test(text);
