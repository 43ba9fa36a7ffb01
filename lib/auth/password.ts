import { hash, verify } from "@node-rs/argon2";

/** Parameters of OWASP's password storage guidance for argon2id: 19 MiB, two passes, one lane. */
const OPTIONS = { memoryCost: 19_456, timeCost: 2, parallelism: 1 };

export function hashPassword(password: string): Promise<string> {
  return hash(password.normalize("NFKC"), OPTIONS);
}

/**
 * Whether the password is the one that was hashed. Without a hash (unknown e-mail, or an account that signs
 * in by mail only) the same work is done and the answer is no, so that time does not tell who exists.
 */
export async function isPassword(password: string, passwordHash: string | null): Promise<boolean> {
  decoy ??= hashPassword("a password that nobody has");
  return (await verify(passwordHash ?? (await decoy), password.normalize("NFKC"))) && passwordHash !== null;
}

let decoy: Promise<string> | undefined;
