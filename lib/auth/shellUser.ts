import type { Actor, Role } from "./actor";

export type ShellPerson = { name: string; email: string; role: Role };

/** What the frame of the pages shows of the signed-in person. */
export function shellUserOf(actor: Actor | null): ShellPerson | null {
  if (!actor || actor.role === "anonymous") return null;
  return { name: actor.name, email: actor.email, role: actor.role };
}
