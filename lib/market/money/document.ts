import { PDFDocument, StandardFonts, rgb, type PDFFont, type PDFPage } from "pdf-lib";

export type PaperLine = {
  /** Columns before the amount: a date, a text. */
  when?: string;
  text: string;
  amount: string;
  balance?: string;
  /** Set in bold under a rule: a sum. */
  isSum?: boolean;
};

export type Paper = {
  title: string;
  /** Small print under the title: for whom, number, time. */
  facts: readonly (readonly [label: string, value: string])[];
  lines: readonly PaperLine[];
  /** Sentences at the end. */
  notes: readonly string[];
};

const A4 = { width: 595.28, height: 841.89 }; // pt, ISO 216
const MARGIN = 56;
const RIGHT = A4.width - MARGIN;
const AMOUNT_RIGHT = RIGHT - 90;
const LEADING = 16;
const INK = rgb(0.13, 0.19, 0.23);
const MUTED = rgb(0.33, 0.38, 0.42);

/**
 * A paper as PDF: A4, as many pages as it takes, dated by `nowMs` so that the same paper has the same bytes.
 * The standard fonts know the characters of Windows-1252; others are written by their base letter or as "?".
 */
export async function renderPaper(paper: Paper, nowMs: number): Promise<Uint8Array> {
  const pdf = await PDFDocument.create();
  const date = new Date(nowMs);
  pdf.setTitle(paper.title, { showInWindowTitleBar: true });
  pdf.setProducer("Merestone");
  pdf.setCreator("Merestone");
  pdf.setLanguage("en");
  pdf.setCreationDate(date);
  pdf.setModificationDate(date);
  const plain = await pdf.embedFont(StandardFonts.Helvetica);
  const bold = await pdf.embedFont(StandardFonts.HelveticaBold);
  const heading = await pdf.embedFont(StandardFonts.TimesRomanBold);
  let page: PDFPage = pdf.addPage([A4.width, A4.height]);
  let y = A4.height - MARGIN;

  const write = (
    text: string,
    { x = MARGIN, font = plain, size = 10, color = INK, alignRight = false } = {},
  ) => {
    const safe = toWinAnsi(text, font);
    const left = alignRight ? x - font.widthOfTextAtSize(safe, size) : x;
    page.drawText(safe, { x: left, y, font, size, color });
  };
  const turn = () => {
    if (y > MARGIN + LEADING) return;
    page = pdf.addPage([A4.width, A4.height]);
    y = A4.height - MARGIN;
  };
  const rule = () =>
    page.drawLine({
      start: { x: MARGIN, y: y + 12 },
      end: { x: RIGHT, y: y + 12 },
      thickness: 0.5,
      color: MUTED,
    });

  write("Merestone", { font: heading, size: 12, color: MUTED });
  y -= 34;
  write(paper.title, { font: heading, size: 20 });
  y -= 30;
  for (const [label, value] of paper.facts) {
    write(label, { color: MUTED });
    write(value, { x: MARGIN + 110 });
    y -= LEADING;
  }
  y -= LEADING;
  if (paper.lines.some((line) => line.balance !== undefined)) {
    write("Moved", { x: AMOUNT_RIGHT, color: MUTED, alignRight: true });
    write("Balance", { x: RIGHT, color: MUTED, alignRight: true });
    y -= LEADING;
  }
  for (const line of paper.lines) {
    turn();
    const font = line.isSum ? bold : plain;
    if (line.isSum) rule();
    if (line.when) write(line.when, { color: MUTED });
    const x = line.when ? MARGIN + 70 : MARGIN;
    write(shorten(line.text, font, AMOUNT_RIGHT - 80 - x), { x, font });
    write(line.amount, { x: line.balance === undefined ? RIGHT : AMOUNT_RIGHT, font, alignRight: true });
    if (line.balance !== undefined) write(line.balance, { x: RIGHT, color: MUTED, alignRight: true });
    y -= LEADING;
  }
  y -= LEADING;
  for (const note of paper.notes) {
    for (const row of wrap(note, plain, RIGHT - MARGIN)) {
      turn();
      write(row, { size: 9, color: MUTED });
      y -= 13;
    }
  }
  const pages = pdf.getPages();
  pages.forEach((each, index) => {
    page = each;
    y = MARGIN / 2;
    write(`${index + 1} of ${pages.length}`, { x: RIGHT, size: 8, color: MUTED, alignRight: true });
  });
  return pdf.save();
}

function toWinAnsi(text: string, font: PDFFont): string {
  const known = new Set(font.getCharacterSet());
  const has = (character: string) => known.has(character.codePointAt(0) ?? -1);
  return [...text]
    .map((character) => {
      if (has(character)) return character;
      const base = [...character.normalize("NFD")][0] ?? "?";
      return has(base) ? base : "?";
    })
    .join("");
}

function shorten(text: string, font: PDFFont, widthMax: number): string {
  const safe = toWinAnsi(text, font);
  if (font.widthOfTextAtSize(safe, 10) <= widthMax) return safe;
  let end = safe.length;
  while (end > 1 && font.widthOfTextAtSize(`${safe.slice(0, end)}...`, 10) > widthMax) end -= 1;
  return `${safe.slice(0, end)}...`;
}

function wrap(text: string, font: PDFFont, widthMax: number): string[] {
  const rows: string[] = [];
  let row = "";
  for (const word of toWinAnsi(text, font).split(" ")) {
    const longer = row === "" ? word : `${row} ${word}`;
    if (row !== "" && font.widthOfTextAtSize(longer, 9) > widthMax) {
      rows.push(row);
      row = word;
    } else row = longer;
  }
  return [...rows, row];
}
