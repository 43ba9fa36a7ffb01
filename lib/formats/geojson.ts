import { ringOfBox } from "@/lib/geometry/box";
import { maskFromRle, rleFromMask } from "@/lib/geometry/rle";
import { rasteriseRings } from "@/lib/geometry/mask";
import { partsOfRings, withSense } from "@/lib/geometry/nest";
import { traceMask } from "@/lib/geometry/trace";
import type { LabelShape } from "@/lib/geometry/rle";
import type { Point, Ring, Rings } from "@/lib/geometry/types";
import { contextOf } from "./cocoFile";
import { parseCocoClass, parseCocoImage, type CocoContext } from "./coco";
import { classNames, FormatError, type Dataset, type DatasetAnnotation, type DatasetSource } from "./dataset";
import { asFields, asList, asCoordinate, asWhole, describe, findFlag, present, type Fields } from "./fields";
import { extraFields, parseExtras } from "./properties";

/** Says what the numbers mean, since RFC 7946 knows only longitude and latitude. */
const COORDINATES =
  "pixels of the upright image: x right, y down, origin at the top left corner of the top left pixel";

/**
 * Writes a dataset as one GeoJSON-shaped feature collection, a piece at a time: a feature an annotation, a MultiPolygon
 * or Polygon with holes, classes and images as foreign members. The geometry is RFC 7946's; the coordinates are
 * pixels, so the file does not conform to its reference system. Outer rings run
 * anticlockwise and holes clockwise for a reader whose y points up. Masks are traced along their pixels' edges, without loss.
 */
export function* writeGeoJson(source: DatasetSource): Generator<string> {
  const nameOf = classNames(source.classes);
  yield `{"type":"FeatureCollection",\n"coordinates_are":${JSON.stringify(COORDINATES)},\n"images":[`;
  for (const [i, { id, fileName, width, height, sha256 }] of source.images.entries()) {
    yield `${i === 0 ? "" : ","}\n${JSON.stringify(present({ id, file_name: fileName, width, height, sha256 }))}`;
  }
  yield `],\n"categories":[`;
  for (const [i, { id, name }] of source.classes.entries())
    yield `${i === 0 ? "" : ","}\n${JSON.stringify({ id, name })}`;
  yield `],\n"features":[`;
  let count = 0;
  for (const image of source.images) {
    for (const annotation of source.annotationsOf(image.id)) {
      yield `${count++ === 0 ? "" : ","}\n${JSON.stringify(featureOf(annotation, image.fileName, nameOf(annotation.classId)))}`;
    }
  }
  yield "]}\n";
}

function featureOf(annotation: DatasetAnnotation, fileName: string, className: string): Fields {
  const { id, imageId, classId, shape, crowd } = annotation;
  return {
    type: "Feature",
    id,
    geometry: geometryOf(shape),
    properties: {
      image_id: imageId,
      file_name: fileName,
      category_id: classId,
      category: className,
      shape: shape.kind,
      crowd,
      ...extraFields(annotation),
    },
  };
}

function geometryOf(shape: LabelShape): Fields {
  const rings =
    shape.kind === "box"
      ? [ringOfBox(shape.box)]
      : shape.kind === "polygon"
        ? shape.rings
        : traceMask(maskFromRle(shape.rle));
  const parts = partsOfRings(rings.filter((ring) => ring.length >= 3)).map(({ outer, holes }) =>
    // RFC 7946 wants outer rings anticlockwise in axes with y up, which is clockwise on our screen.
    [withSense(outer, true), ...holes.map((hole) => withSense(hole, false))].map(closed),
  );
  return parts.length === 1
    ? { type: "Polygon", coordinates: parts[0] }
    : { type: "MultiPolygon", coordinates: parts };
}

function closed(ring: Ring): Ring {
  const first = ring[0];
  return first === undefined ? ring : [...ring, first];
}

/** Reads what `writeGeoJson` writes. Throws FormatError for the first record that is wrong. */
export function readGeoJson(value: unknown): Dataset {
  const fields = asFields(value, "");
  if (fields.type !== "FeatureCollection") {
    throw new FormatError("", `type is ${describe(fields.type)}, not "FeatureCollection"`);
  }
  const images = asList(fields.images, "", "images").map((image, i) => parseCocoImage(image, `images[${i}]`));
  const classes = asList(fields.categories, "", "categories").map((item, i) =>
    parseCocoClass(item, `categories[${i}]`),
  );
  const context = contextOf({ images, classes });
  const annotations = asList(fields.features, "", "features").map((feature, i) =>
    parseFeature(feature, `features[${i}]`, i + 1, context),
  );
  return { images, classes, annotations };
}

function parseFeature(
  value: unknown,
  record: string,
  fallbackId: number,
  context: CocoContext,
): DatasetAnnotation {
  const feature = asFields(value, record);
  const properties = asFields(feature.properties, `${record}.properties`);
  const imageId = asWhole(properties.image_id, record, "image_id");
  const image = context.imageById.get(imageId);
  if (!image) throw new FormatError(record, `image_id ${imageId} is not listed in images`);
  const classId = asWhole(properties.category_id, record, "category_id");
  if (!context.classIds.has(classId))
    throw new FormatError(record, `category_id ${classId} is not listed in categories`);
  const rings = parseGeometry(asFields(feature.geometry, `${record}.geometry`), record);
  return {
    id: feature.id === undefined ? fallbackId : asWhole(feature.id, record, "id"),
    imageId,
    classId,
    shape: shapeOf(properties.shape, rings, image, record),
    crowd: findFlag(properties.crowd, record, "crowd") ?? false,
    ...parseExtras(properties, record),
  };
}

function shapeOf(
  kind: unknown,
  rings: Rings,
  image: { width: number; height: number },
  record: string,
): LabelShape {
  if (kind === undefined || kind === "polygon") return { kind: "polygon", rings };
  if (kind === "mask") {
    const mask = rasteriseRings(rings, image.width, image.height);
    return { kind: "mask", rle: rleFromMask(mask, image.width, image.height) };
  }
  if (kind !== "box") throw new FormatError(record, `shape is ${describe(kind)}, not box, polygon or mask`);
  const points = rings.flat();
  const xs = points.map(([x]) => x);
  const ys = points.map(([, y]) => y);
  const [left, top] = [Math.min(...xs), Math.min(...ys)];
  return { kind: "box", box: [left, top, Math.max(...xs) - left, Math.max(...ys) - top] };
}

function parseGeometry({ type, coordinates }: Fields, record: string): Rings {
  const list = asList(coordinates, record, "coordinates");
  if (type === "Polygon") return list.map((ring) => parseRing(ring, record));
  if (type === "MultiPolygon") {
    return list.flatMap((polygon) =>
      asList(polygon, record, "a polygon").map((ring) => parseRing(ring, record)),
    );
  }
  throw new FormatError(record, `geometry is ${describe(type)}, not Polygon or MultiPolygon`);
}

/** A linear ring has four positions or more, the last one the first again. */
function parseRing(value: unknown, record: string): Ring {
  const ring = asList(value, record, "a ring").map((position): Point => {
    const [x, y] = asList(position, record, "a position");
    return [asCoordinate(x, record, "a coordinate"), asCoordinate(y, record, "a coordinate")];
  });
  const [first, last] = [ring[0], ring[ring.length - 1]];
  if (!first || !last || ring.length < 4 || first[0] !== last[0] || first[1] !== last[1]) {
    throw new FormatError(record, "a ring needs four positions or more, the last the same as the first");
  }
  return ring.slice(0, -1);
}
