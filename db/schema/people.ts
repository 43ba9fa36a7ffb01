import { index, integer, primaryKey, sqliteTable, text, uniqueIndex } from "drizzle-orm/sqlite-core";

export const ROLES = ["requester", "annotator", "admin"] as const;
export const TEAM_ROLES = ["owner", "editor", "viewer"] as const;

export const users = sqliteTable("users", {
  id: text("id").primaryKey(),
  email: text("email").notNull().unique(), // lower case
  name: text("name").notNull(),
  passwordHash: text("password_hash"), // null: signs in by mail link only
  role: text("role", { enum: ROLES }).notNull(),
  status: text("status", { enum: ["active", "suspended"] })
    .notNull()
    .default("active"),
  emailVerifiedAtMs: integer("email_verified_at_ms"),
  /** Raised by "sign out everywhere" and by a password change: older sessions stop at once. */
  sessionEpoch: integer("session_epoch").notNull().default(0),
  acceptsSensitive: integer("accepts_sensitive", { mode: "boolean" }).notNull().default(false),
  stripeAccountId: text("stripe_account_id").unique(),
  payoutsEnabled: integer("payouts_enabled", { mode: "boolean" }).notNull().default(false),
  createdAtMs: integer("created_at_ms").notNull(),
});

export const teams = sqliteTable("teams", {
  id: text("id").primaryKey(),
  name: text("name").notNull(),
  createdAtMs: integer("created_at_ms").notNull(),
});

export const teamMembers = sqliteTable(
  "team_members",
  {
    teamId: text("team_id")
      .notNull()
      .references(() => teams.id),
    userId: text("user_id")
      .notNull()
      .references(() => users.id),
    role: text("role", { enum: TEAM_ROLES }).notNull(),
    joinedAtMs: integer("joined_at_ms").notNull(),
  },
  (t) => [primaryKey({ columns: [t.teamId, t.userId] }), index("team_members_user").on(t.userId)],
);

export const teamInvites = sqliteTable(
  "team_invites",
  {
    id: text("id").primaryKey(),
    teamId: text("team_id")
      .notNull()
      .references(() => teams.id),
    email: text("email").notNull(),
    role: text("role", { enum: TEAM_ROLES }).notNull(),
    invitedBy: text("invited_by")
      .notNull()
      .references(() => users.id),
    createdAtMs: integer("created_at_ms").notNull(),
    expiresAtMs: integer("expires_at_ms").notNull(),
    acceptedAtMs: integer("accepted_at_ms"),
    revokedAtMs: integer("revoked_at_ms"),
  },
  (t) => [index("team_invites_team").on(t.teamId)],
);

/** One-time links. Only the SHA-256 of the secret is kept. */
export const mailTokens = sqliteTable(
  "mail_tokens",
  {
    id: text("id").primaryKey(),
    secretHash: text("secret_hash").notNull(),
    purpose: text("purpose", { enum: ["verify", "reset", "sign-in", "invite"] }).notNull(),
    email: text("email").notNull(),
    userId: text("user_id").references(() => users.id),
    inviteId: text("invite_id").references(() => teamInvites.id),
    createdAtMs: integer("created_at_ms").notNull(),
    expiresAtMs: integer("expires_at_ms").notNull(),
    usedAtMs: integer("used_at_ms"),
  },
  (t) => [
    uniqueIndex("mail_tokens_secret").on(t.secretHash),
    index("mail_tokens_email").on(t.email, t.purpose),
  ],
);
