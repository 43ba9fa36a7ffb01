import { redirect } from "next/navigation";
import { homeOf } from "@/components/shell/nav";
import { findActor } from "@/lib/auth/actor";
import { shellUserOf } from "@/lib/auth/shellUser";

/** The place where the signed-in person's work begins. */
export async function GET(): Promise<never> {
  const user = shellUserOf(await findActor());
  redirect(user ? homeOf(user.role) : "/sign-in");
}
