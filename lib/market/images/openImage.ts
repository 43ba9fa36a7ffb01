import { and, eq, inArray } from "drizzle-orm";
import { getDb, type Reader } from "@/db/client";
import { findBatch, findImage, type ImageRow } from "@/db/queries/batches";
import { getTeamRole } from "@/db/queries/people";
import { briefExamples, claims } from "@/db/schema";
import type { Actor } from "@/lib/auth/actor";
import { AppError } from "@/lib/errors";
import { streamObject } from "@/lib/services/store";

type Input = { actor: Actor; imageId: string; variant: "working" | "thumb" };

/** The stored copy of an image, for its team, for admins, and for annotators who hold or held it. */
export async function openImage({ actor, imageId, variant }: Input) {
  const db = getDb();
  const image = findImage(db, imageId);
  if (!image || !maySee(db, image, actor)) throw new AppError("not_found", "There is no such image.");
  const key = variant === "thumb" ? image.thumbKey : image.workingKey;
  if (!key) throw new AppError("not_found", "This image has not been checked yet.");
  const { stream, byteSize } = await streamObject(key);
  const mediaType =
    variant === "thumb"
      ? "image/webp"
      : image.mediaType === "image/png" || image.mediaType === "image/tiff"
        ? "image/png"
        : "image/jpeg";
  return { stream, byteSize, mediaType };
}

function maySee(db: Reader, image: ImageRow, actor: Actor): boolean {
  if (actor.role === "admin") return true;
  const batch = findBatch(db, image.batchId);
  if (!batch) return false;
  if (actor.role === "requester") return getTeamRole(db, batch.teamId, actor.id) !== undefined;
  const held = db
    .select({ id: claims.id })
    .from(claims)
    .where(
      and(
        eq(claims.imageId, image.id),
        eq(claims.annotatorId, actor.id),
        inArray(claims.status, ["live", "submitted", "expired"]),
      ),
    )
    .limit(1)
    .get();
  if (held) return true;
  const isExample = db
    .select({ id: briefExamples.id })
    .from(briefExamples)
    .where(eq(briefExamples.imageId, image.id))
    .limit(1)
    .get();
  return Boolean(isExample) && batch.status !== "draft";
}
