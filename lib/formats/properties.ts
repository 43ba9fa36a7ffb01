import type { Box } from "@/lib/geometry/types";
import { FormatError, type DatasetAnnotation } from "./dataset";
import { asCoordinate, asList, findFlag, findNumber, present, type Fields } from "./fields";

type Extras = Pick<
  DatasetAnnotation,
  "box" | "areaPx2" | "truncated" | "occluded" | "difficult" | "score" | "support" | "spread"
>;

/** What an annotation may state beside shape and class, under the names that our files use. */
export function extraFields(annotation: Extras): Fields {
  const { box, areaPx2, truncated, occluded, difficult, score, support, spread } = annotation;
  return present({ bbox: box, area: areaPx2, truncated, occluded, difficult, score, support, spread });
}

/** Reads back what `extraFields` gives; absent stays absent. */
export function parseExtras(fields: Fields, record: string): Extras {
  return present({
    box: fields.bbox === undefined ? undefined : parseFour(fields.bbox, record),
    areaPx2: findNumber(fields.area, record, "area"),
    truncated: findFlag(fields.truncated, record, "truncated"),
    occluded: findFlag(fields.occluded, record, "occluded"),
    difficult: findFlag(fields.difficult, record, "difficult"),
    score: findNumber(fields.score, record, "score"),
    support: findNumber(fields.support, record, "support"),
    spread: findNumber(fields.spread, record, "spread"),
  });
}

/** Four numbers: x, y, width, height. */
export function parseFour(value: unknown, record: string): Box {
  const numbers = asList(value, record, "bbox").map((number) =>
    asCoordinate(number, record, "a number of bbox"),
  );
  const [x, y, width, height] = numbers;
  if (
    numbers.length !== 4 ||
    x === undefined ||
    y === undefined ||
    width === undefined ||
    height === undefined
  ) {
    throw new FormatError(record, `bbox has ${numbers.length} numbers, not 4`);
  }
  return [x, y, width, height];
}
