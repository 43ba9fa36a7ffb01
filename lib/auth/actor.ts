import { cookies } from "next/headers";
import { decode } from "next-auth/jwt";
import { getDb } from "@/db/client";
import { findUser } from "@/db/queries/people";
import { env } from "@/lib/env";
import { AppError } from "@/lib/errors";

export type Role = "requester" | "annotator" | "admin";

/** Who acts. `public` routes get the anonymous actor, whose id is empty. */
export type Actor = { id: string; role: Role | "anonymous"; name: string; email: string };

export type RoleSpec = Role | readonly Role[] | "any" | "public";

const ANONYMOUS: Actor = { id: "", role: "anonymous", name: "", email: "" };

/** Cookie that next-auth writes; `__Secure-` where the site is served over TLS. */
export function sessionCookieName(): string {
  return env().APP_URL.startsWith("https:") ? "__Secure-next-auth.session-token" : "next-auth.session-token";
}

/**
 * The person behind the request, or null. The session token only says who; role and status are read from
 * the database each time, so that a suspension or "sign out everywhere" works at once.
 */
export async function findActor(): Promise<Actor | null> {
  const token = (await cookies()).get(sessionCookieName())?.value;
  if (!token) return null;
  const claims = await decode({ token, secret: env().AUTH_SECRET }).catch(() => null);
  if (!claims?.sub) return null;
  const user = findUser(getDb(), claims.sub);
  if (!user || user.status !== "active" || user.sessionEpoch !== claims.epoch) return null;
  return { id: user.id, role: user.role, name: user.name, email: user.email };
}

/** The actor, or an AppError: unauthenticated without a session, forbidden with another role. */
export async function requireActor(spec: RoleSpec): Promise<Actor> {
  if (spec === "public") return (await findActor()) ?? ANONYMOUS;
  const actor = await findActor();
  if (!actor) throw new AppError("unauthenticated", "Please sign in.");
  const allowed =
    spec === "any" || (typeof spec === "string" ? actor.role === spec : spec.includes(actor.role as Role));
  if (!allowed) throw new AppError("forbidden", "Your account cannot do this.");
  return actor;
}
