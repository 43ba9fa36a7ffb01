import { XMLParser } from "fast-xml-parser";
import { escapeHtml } from "../shared/page";
import type { Answer } from "../shared/transport";
import { S3Error } from "./errors";

type Value = string | number | boolean | undefined | Element[];
export type Element = readonly [name: string, value: Value];

/** Nested elements as text; undefined leaves an element out. */
function write(elements: readonly Element[]): string {
  return elements
    .map(([name, value]) => {
      if (value === undefined) return "";
      const inner = Array.isArray(value) ? write(value) : escapeHtml(String(value));
      return `<${name}>${inner}</${name}>`;
    })
    .join("");
}

export const xml = (
  status: number,
  root: string,
  elements: Element[],
  headers: Record<string, string> = {},
): Answer => ({
  status,
  headers: { "content-type": "application/xml", ...headers },
  body: `<?xml version="1.0" encoding="UTF-8"?>\n<${root} xmlns="http://s3.amazonaws.com/doc/2006-03-01/">${write(elements)}</${root}>`,
});

export const errorXml = (error: S3Error, resource: string, requestId: string): Answer => ({
  status: error.status,
  headers: { "content-type": "application/xml", ...error.headers },
  body: `<?xml version="1.0" encoding="UTF-8"?>\n<Error>${write([
    ["Code", error.code],
    ["Message", error.message],
    ["Resource", resource],
    ["RequestId", requestId],
  ])}</Error>`,
});

const parser = new XMLParser({
  parseTagValue: false,
  isArray: (name) => name === "Part" || name === "Object",
  processEntities: true,
});

/** The children of a document's root that have this name, each as its own children's texts. */
export function readXml(
  text: string,
  root: string,
  child: string,
): { items: Record<string, string>[]; root: Record<string, unknown> } {
  try {
    const document = parser.parse(text, true) as Record<string, Record<string, unknown> | undefined>;
    const top = document[root];
    const items = top?.[child];
    if (!top || !Array.isArray(items))
      throw new S3Error("MalformedXML", `A ${root} with at least one ${child} is required.`);
    return { root: top, items: items as Record<string, string>[] };
  } catch (error) {
    if (error instanceof S3Error) throw error;
    throw new S3Error("MalformedXML", "The XML you provided was not well-formed or did not validate.");
  }
}
