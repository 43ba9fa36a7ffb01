import { createHash } from "node:crypto";
import { eq } from "drizzle-orm";
import sharp from "sharp";
import { getDb, inTransaction } from "@/db/client";
import { findImage } from "@/db/queries/batches";
import { images } from "@/db/schema";
import { IMAGE_BYTES_MAX, IMAGE_PIXELS_MAX } from "@/lib/contracts/batches";
import { queueProposals } from "@/lib/market/proposals/queueProposals";
import { deleteObject, getObject, putObject } from "@/lib/services/store";
import { mediaTypeOf } from "./mediaType";

/** Longest side of a thumbnail, px. */
const THUMB_SIDE_PX = 480;

type Checked =
  | { ok: false; reason: string }
  | {
      ok: true;
      /** What the first bytes say that the upload is. */
      mediaType: string;
      working: Buffer;
      workingType: "image/jpeg" | "image/png";
      thumb: Buffer;
      width: number;
      height: number;
      orientation: number;
    };

/**
 * The job behind each upload: type by the first bytes and size before anything is decoded, then the upright
 * working copy without any metadata, the thumbnail, and the measures. A bad file is refused with a reason
 * next to its name; the rest of the batch goes on. Running it again gives the same result.
 */
export async function checkImage({ imageId, nowMs }: { imageId: string; nowMs: number }): Promise<void> {
  const db = getDb();
  const image = findImage(db, imageId);
  if (!image || image.status === "awaiting") return;
  if (image.status !== "checking") return deleteObject(image.originalKey); // a crash may have left it
  const bytes = await getObject(image.originalKey);
  const sha256 = createHash("sha256").update(bytes).digest("hex");
  const checked =
    sha256 === image.sha256
      ? await inspect(bytes)
      : ({ ok: false, reason: "The file changed on its way. Upload it again." } as const);
  if (!checked.ok) {
    db.update(images).set({ status: "refused", refusal: checked.reason }).where(eq(images.id, imageId)).run();
    return deleteObject(image.originalKey);
  }
  const workingKey = `batches/${image.batchId}/images/${imageId}`;
  const thumbKey = `batches/${image.batchId}/thumbs/${imageId}.webp`;
  await putObject(workingKey, checked.working, checked.workingType);
  await putObject(thumbKey, checked.thumb, "image/webp");
  inTransaction(db, (tx) => {
    tx.update(images)
      .set({
        status: "ready",
        workingKey,
        thumbKey,
        mediaType: checked.mediaType, // what the bytes are, not what the browser said
        width: checked.width,
        height: checked.height,
        exifOrientation: checked.orientation,
        proposalState: "queued",
      })
      .where(eq(images.id, imageId))
      .run();
    queueProposals(tx, { imageId, batchId: image.batchId, nowMs });
  });
  // The original carries camera and place: the upright, stripped copy replaces it. Last, so that an attempt
  // that was cut short finds it again.
  await deleteObject(image.originalKey);
}

/** Checks and converts the bytes of one upload. Never throws for a bad file: it answers with the reason. */
export async function inspect(bytes: Buffer): Promise<Checked> {
  if (bytes.byteLength > IMAGE_BYTES_MAX) return { ok: false, reason: "The file is over 50 MB." };
  const mediaType = mediaTypeOf(bytes);
  if (!mediaType)
    return {
      ok: false,
      reason: "This is not a JPEG, PNG, WebP, AVIF or TIFF picture, whatever its name says.",
    };
  try {
    // The header alone, so that a small file that claims to be huge is refused before it unpacks.
    const header = await sharp(bytes, { limitInputPixels: false }).metadata();
    const pixels = header.width * header.height;
    if (pixels > IMAGE_PIXELS_MAX) {
      return { ok: false, reason: `${header.width} x ${header.height} px is over 50 megapixels.` };
    }
    if ((header.pages ?? 1) > 1 && mediaType !== "image/tiff")
      return { ok: false, reason: "Moving pictures are not taken; upload single frames." };
    const input = () =>
      sharp(bytes, { limitInputPixels: IMAGE_PIXELS_MAX, failOn: "error", pages: 1 }).autoOrient();
    // Without loss where the upload had none; a photograph stays a photograph, at a quality that shows no loss.
    const isLossless = mediaType === "image/png" || mediaType === "image/tiff";
    const flat = input().toColourspace("srgb").flatten({ background: "#ffffff" });
    const upright = await (
      isLossless ? flat.png({ compressionLevel: 6 }) : flat.jpeg({ quality: 95, chromaSubsampling: "4:4:4" })
    ).toBuffer({ resolveWithObject: true });
    const thumb = await input()
      .toColourspace("srgb")
      .flatten({ background: "#ffffff" })
      .resize(THUMB_SIDE_PX, THUMB_SIDE_PX, { fit: "inside", withoutEnlargement: true })
      .webp({ quality: 80 })
      .toBuffer();
    return {
      ok: true,
      mediaType,
      working: upright.data,
      workingType: isLossless ? "image/png" : "image/jpeg",
      thumb,
      width: upright.info.width,
      height: upright.info.height,
      orientation: header.orientation ?? 1,
    };
  } catch (error) {
    const detail = error instanceof Error ? (error.message.split("\n")[0] ?? "") : "";
    return { ok: false, reason: `The picture cannot be read (${detail.slice(0, 120)}).` };
  }
}
