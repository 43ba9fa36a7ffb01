import { areaOf, boxOf, classNames, type DatasetSource } from "./dataset";

const COLUMNS = [
  "file_name",
  "image_id",
  "annotation_id",
  "class",
  "shape",
  "x",
  "y",
  "width",
  "height",
  "area_px2",
  "crowd",
  "score",
  "support",
  "spread",
] as const;

/**
 * Writes one line an annotation, a piece at a time, in the form of RFC 4180. It is a summary for spreadsheets: outlines are
 * left out. Text that a spreadsheet would run as a formula gets an apostrophe in front (common practice).
 */
export function* writeCsv(source: DatasetSource): Generator<string> {
  const nameOf = classNames(source.classes);
  yield line([...COLUMNS]);
  for (const image of source.images) {
    for (const annotation of source.annotationsOf(image.id)) {
      const [x, y, width, height] = boxOf(annotation);
      const { id, classId, shape, crowd, score, support, spread } = annotation;
      yield line([
        text(image.fileName),
        image.id,
        id,
        text(nameOf(classId)),
        shape.kind,
        x,
        y,
        width,
        height,
        areaOf(annotation),
        Number(crowd),
        score ?? "",
        support ?? "",
        spread ?? "",
      ]);
    }
  }
}

function text(value: string): string {
  return /^[=+\-@\t\r]/.test(value) ? `'${value}` : value;
}

function line(fields: readonly (string | number)[]): string {
  const quoted = fields.map((field) => {
    const value = String(field);
    return /[",\r\n]/.test(value) ? `"${value.replaceAll('"', '""')}"` : value;
  });
  return `${quoted.join(",")}\r\n`;
}
