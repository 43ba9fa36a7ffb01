import { openDataset, READ_FORMATS, writeDataset, WRITE_FORMATS } from "@/lib/formats/formats";
import type { DatasetSource } from "@/lib/formats/dataset";
import { inFile, InputError, progressLine, runCommand, writeFileWhole, writeFolderWhole } from "./cli";

void runCommand(
  {
    name: "convert",
    summary: "Converts labels between COCO, Pascal VOC, GeoJSON, Web Annotation, instance-mask PNG and CSV.",
    options: {
      from: { value: "FORMAT", required: true, help: READ_FORMATS.join(", ") },
      to: { value: "FORMAT", required: true, help: WRITE_FORMATS.join(", ") },
      in: { value: "PATH", required: true, help: "file to read, or folder for voc and mask" },
      out: { value: "PATH", required: true, help: "file to write, or new folder for voc and mask" },
      palette: { help: "masks in colours rather than grey levels (up to 255 instances an image)" },
    },
    notes: [
      "COCO to COCO, GeoJSON and Web Annotation keep coordinates and masks exactly. VOC keeps boxes, rounded to whole",
      "pixels. Mask PNGs keep the pixels that no smaller instance covers. CSV is a summary and is not read back.",
    ],
  },
  ({ from, to, in: input, out, palette }) => {
    const readFormat = oneOf(READ_FORMATS, from, "--from");
    const writeFormat = oneOf(WRITE_FORMATS, to, "--to");
    const reading = progressLine("reading");
    const { source, close } = inFile(input, () => openDataset(readFormat, input, reading.step));
    reading.done();
    const writing = progressLine("writing");
    const written = writeDataset(writeFormat, withProgress(source, writing.step), { palette });
    inFile(input, () => {
      if (written.kind === "file") writeFileWhole(out, written.text);
      else writeFolderWhole(out, written.files);
    });
    writing.done();
    close();
  },
);

function oneOf<T extends string>(list: readonly T[], value: string, option: string): T {
  const found = list.find((item) => item === value.toLowerCase());
  if (found === undefined)
    throw new InputError(`${option} is ${JSON.stringify(value)}, not one of ${list.join(", ")}`);
  return found;
}

/** Writers ask for one image after the other, so the images asked for are the work done. */
function withProgress(source: DatasetSource, step: (done: number, all: number) => void): DatasetSource {
  let asked = 0;
  return {
    ...source,
    annotationsOf: (imageId) => {
      step(++asked, source.images.length);
      return source.annotationsOf(imageId);
    },
  };
}
