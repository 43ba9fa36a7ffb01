import type { PdfFile } from "@/lib/market/money/statements";

/** A paper as a download. */
export function pdfResponse({ fileName, bytes }: PdfFile): Response {
  return new Response(new Uint8Array(bytes), {
    headers: {
      "content-type": "application/pdf",
      "content-disposition": `attachment; filename="${fileName}"`,
      "cache-control": "private, no-store",
    },
  });
}
