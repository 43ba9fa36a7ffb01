import { z } from "zod";

const Email = z
  .string()
  .trim()
  .toLowerCase()
  .pipe(z.email("Enter an e-mail address, like name@example.org."))
  .pipe(z.string().max(200));

const Name = z.string().trim().min(1, "Enter a name.").max(80, "80 characters at most.");

const Password = z
  .string()
  .min(10, "10 characters or more; a few words in a row are easy to remember.")
  .max(200, "200 characters at most.");

export const SignUpInput = z.object({
  email: Email,
  name: Name,
  role: z.enum(["requester", "annotator"], "Choose what you come for."),
  teamName: z.string().trim().max(80).default(""),
  password: z.union([z.literal(""), Password]).default(""), // empty: signs in by mail link
});
export type SignUpInput = z.output<typeof SignUpInput>;

export const EmailInput = z.object({ email: Email });

export const ResetInput = z.object({ secret: z.string().min(20).max(100), password: Password });

export const AccountInput = z.object({
  name: Name,
  acceptsSensitive: z.preprocess(
    (value) => value === "on" || value === true || value === "true",
    z.boolean(),
  ),
});

export const PasswordInput = z.object({ current: z.string().max(200).default(""), password: Password });

export const InviteInput = z.object({
  teamId: z.string(),
  email: Email,
  role: z.enum(["owner", "editor", "viewer"]),
});

export const MemberInput = z.object({
  teamId: z.string(),
  userId: z.string(),
  role: z.enum(["owner", "editor", "viewer", "remove"]),
});
