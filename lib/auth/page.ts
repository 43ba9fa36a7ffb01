import { headers } from "next/headers";
import { notFound, redirect } from "next/navigation";
import { AppError } from "@/lib/errors";
import { findActor, type Actor, type Role } from "./actor";

/** The actor of a page. Without a session: to the sign-in page and back; with another role: not found. */
export async function requirePageActor(...roles: Role[]): Promise<Actor> {
  const actor = await findActor();
  if (!actor) {
    const path = (await headers()).get("x-merestone-path") ?? "/home";
    redirect(`/sign-in?callbackUrl=${encodeURIComponent(path)}`);
  }
  if (roles.length > 0 && !roles.includes(actor.role as Role)) notFound();
  return actor;
}

/** Runs a query for a page; what the actor may not know of becomes the not-found page. */
export function orNotFound<T>(read: () => T): T {
  try {
    return read();
  } catch (error) {
    if (error instanceof AppError && (error.code === "not_found" || error.code === "forbidden")) notFound();
    throw error;
  }
}
