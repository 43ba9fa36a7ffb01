import NextAuth from "next-auth";
import { authOptions } from "@/lib/auth/options";
import { env } from "@/lib/env";

process.env.NEXTAUTH_URL ??= env().APP_URL; // next-auth reads it from the environment only

const handler = NextAuth(authOptions());

export { handler as GET, handler as POST };
