import { FormatError } from "./dataset";

/** Typed reads from parsed JSON or XML. Each names the record and the field in what it refuses. */

export type Fields = { readonly [key: string]: unknown };

export function asFields(value: unknown, record: string): Fields {
  if (typeof value !== "object" || value === null || Array.isArray(value)) {
    throw new FormatError(record, `is ${describe(value)}, not an object`);
  }
  return value as Fields;
}

export function asList(value: unknown, record: string, field: string): readonly unknown[] {
  if (!Array.isArray(value)) throw new FormatError(record, `${field} is ${describe(value)}, not a list`);
  return value;
}

export function asText(value: unknown, record: string, field: string): string {
  if (typeof value !== "string" || value === "")
    throw new FormatError(record, `${field} is ${describe(value)}, not text`);
  return value;
}

export function asNumber(value: unknown, record: string, field: string): number {
  if (typeof value !== "number" || !Number.isFinite(value)) {
    throw new FormatError(record, `${field} is ${describe(value)}, not a finite number`);
  }
  return value;
}

/** No image is larger; a coordinate beyond is a mistake that later sums would turn into nonsense. */
const COORDINATE_PX_MAX = 1e7;

/** A coordinate or length in px. It may lie outside the image, as in published sets, but not without bounds. */
export function asCoordinate(value: unknown, record: string, field: string): number {
  const number = asNumber(value, record, field);
  if (Math.abs(number) > COORDINATE_PX_MAX)
    throw new FormatError(record, `${field} is ${number}, which no image reaches`);
  return number;
}

export function asWhole(value: unknown, record: string, field: string, min = 0): number {
  if (typeof value !== "number" || !Number.isSafeInteger(value) || value < min) {
    throw new FormatError(record, `${field} is ${describe(value)}, not a whole number from ${min} on`);
  }
  return value;
}

export function findNumber(value: unknown, record: string, field: string): number | undefined {
  return value === undefined || value === null ? undefined : asNumber(value, record, field);
}

/** True or false, also as 1 or 0. */
export function findFlag(value: unknown, record: string, field: string): boolean | undefined {
  if (value === undefined || value === null) return undefined;
  if (value === true || value === 1) return true;
  if (value === false || value === 0) return false;
  throw new FormatError(record, `${field} is ${describe(value)}, neither 0 nor 1`);
}

/** Pixels of an image whose masks can be held: 2^28, about 16,000 x 16,000. */
const PIXELS_MAX = 2 ** 28;

/** Width and height of an image; both at least 1. */
export function asSize(width: unknown, height: unknown, record: string): { width: number; height: number } {
  const size = { width: asWhole(width, record, "width", 1), height: asWhole(height, record, "height", 1) };
  if (size.width * size.height > PIXELS_MAX) {
    throw new FormatError(
      record,
      `${size.width} x ${size.height} px is more than the ${PIXELS_MAX} pixels that are read`,
    );
  }
  return size;
}

/** A short, one-line picture of a value for a message. */
export function describe(value: unknown): string {
  if (value === undefined) return "absent";
  if (Array.isArray(value)) return "a list";
  if (typeof value === "object" && value !== null) return "an object";
  const text = typeof value === "string" ? JSON.stringify(value) : String(value);
  return text.length > 40 ? `${text.slice(0, 37)}...` : text;
}

type Present<T> = { [K in keyof T]?: Exclude<T[K], undefined> };

/** Leaves out what is undefined, so that absent stays absent. */
export function present<T extends object>(fields: T): Present<T> {
  return Object.fromEntries(Object.entries(fields).filter(([, value]) => value !== undefined)) as Present<T>;
}
