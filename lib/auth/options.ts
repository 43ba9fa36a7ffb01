import type { NextAuthOptions } from "next-auth";
import CredentialsProvider from "next-auth/providers/credentials";
import { getDb } from "@/db/client";
import { findUserByEmail } from "@/db/queries/people";
import { nowMs } from "@/lib/clock";
import { env } from "@/lib/env";
import { AppError } from "@/lib/errors";
import { redeemSignInLink } from "@/lib/market/people/signIn";
import { spendAllowance } from "./limits";
import { isPassword } from "./password";

type SessionUser = { id: string; name: string; email: string; epoch: number };

/**
 * next-auth's settings. Two ways in, both credentials, so that no second table of accounts is needed:
 * `password`, and `link`, whose secret came by mail. The token holds who and the session epoch only; role
 * and status are read from the database on each request (lib/auth/actor.ts).
 */
export function authOptions(): NextAuthOptions {
  return {
    secret: env().AUTH_SECRET,
    session: { strategy: "jwt", maxAge: 14 * 86_400 },
    pages: { signIn: "/sign-in", error: "/sign-in" },
    providers: [
      CredentialsProvider({
        id: "password",
        name: "Password",
        credentials: { email: { type: "email" }, password: { type: "password" } },
        authorize: async (given) => {
          const email = (given?.email ?? "").trim().toLowerCase();
          try {
            await spendAllowance("sign-in", email);
          } catch (error) {
            throw new Error(error instanceof AppError ? error.message : "Try again later.", { cause: error });
          }
          const user = findUserByEmail(getDb(), email);
          if (!(await isPassword(given?.password ?? "", user?.passwordHash ?? null)) || !user) return null;
          if (user.status !== "active") throw new Error("This account is suspended. Write to us to appeal.");
          if (user.emailVerifiedAtMs === null)
            throw new Error("Confirm your e-mail first: open the link we sent.");
          return toSessionUser(user);
        },
      }),
      CredentialsProvider({
        id: "link",
        name: "Mail link",
        credentials: { secret: { type: "text" } },
        authorize: async (given) => {
          const user = redeemSignInLink({ secret: given?.secret ?? "", nowMs: nowMs() });
          return user ? toSessionUser(user) : null;
        },
      }),
    ],
    callbacks: {
      jwt: ({ token, user }) => {
        if (user) {
          token.sub = user.id;
          token.epoch = (user as SessionUser).epoch;
        }
        return token;
      },
    },
  };
}

function toSessionUser(user: { id: string; name: string; email: string; sessionEpoch: number }): SessionUser {
  return { id: user.id, name: user.name, email: user.email, epoch: user.sessionEpoch };
}
