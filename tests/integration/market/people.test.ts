import { eq } from "drizzle-orm";
import { encode } from "next-auth/jwt";
import { beforeEach, describe, expect, it, vi } from "vitest";
import type { Db } from "@/db/client";
import { findUser, findUserByEmail, getTeamRole } from "@/db/queries/people";
import { users } from "@/db/schema";
import { findActor, requireActor, sessionCookieName, type Actor } from "@/lib/auth/actor";
import { hashPassword, isPassword } from "@/lib/auth/password";
import { env } from "@/lib/env";
import { requireBatch } from "@/lib/market/access";
import { createBatch } from "@/lib/market/batches/createBatch";
import { changePassword, resetPassword, sendResetLink, signOutEverywhere } from "@/lib/market/people/account";
import { redeemSignInLink, sendSignInLink } from "@/lib/market/people/signIn";
import { signUp } from "@/lib/market/people/signUp";
import {
  acceptInvitation,
  changeMember,
  findInvitation,
  inviteColleague,
  revokeInvite,
  setSuspended,
} from "@/lib/market/people/team";
import { listOpenInvites } from "@/db/queries/people";
import { freshDb } from "@/tests/support/db";
import { join, letters, person, refusalOf, refusalText, START_MS, team } from "@/tests/support/market";

const cookie = vi.hoisted(() => ({ value: undefined as string | undefined }));
vi.mock("next/headers", () => ({
  cookies: () =>
    Promise.resolve({ get: () => (cookie.value === undefined ? undefined : { value: cookie.value }) }),
}));

const nowMs = START_MS;
let db: Db;
beforeEach(() => {
  db = freshDb();
  cookie.value = undefined;
});

const signIn = async (actor: Actor, secret = env().AUTH_SECRET) => {
  const epoch = findUser(db, actor.id)?.sessionEpoch;
  cookie.value = await encode({ token: { sub: actor.id, epoch }, secret });
};
/** The secret in the link of the latest letter with a tag. */
const secretOf = (tag: string) => /secret=([\w-]+)/.exec(letters(db, tag).at(-1)?.text ?? "")?.[1] ?? "";

describe("a session", () => {
  it("says who acts, with the role that the database has now", async () => {
    const actor = person(db, "annotator");
    await signIn(actor);
    expect(await findActor()).toEqual(actor);
    db.update(users).set({ role: "admin" }).where(eq(users.id, actor.id)).run();
    expect((await requireActor("admin")).role).toBe("admin");
    await expect(requireActor("annotator")).rejects.toMatchObject({ code: "forbidden" });
    expect(sessionCookieName()).toBe("next-auth.session-token");
  });

  it("ends everywhere at once when the person signs out everywhere", async () => {
    const actor = person(db, "annotator");
    await signIn(actor);
    signOutEverywhere({ actor, nowMs });
    expect(await findActor()).toBeNull();
    await expect(requireActor("any")).rejects.toMatchObject({ code: "unauthenticated" });
    await signIn(actor);
    expect(await findActor()).toEqual(actor);
  });

  it("ends at once with a suspension, and the admin's reason is kept", async () => {
    const actor = person(db, "annotator");
    const admin = person(db, "admin");
    await signIn(actor);
    const suspend = (userId: string, suspended: boolean) =>
      setSuspended({ actor: admin, nowMs, userId, suspended, reason: "Copied drawings." });
    suspend(actor.id, true);
    expect(await findActor()).toBeNull();
    suspend(actor.id, false);
    expect(await findActor()).toEqual(actor);
    expect(refusalOf(() => suspend(admin.id, true))).toBe("conflict");
    expect(refusalOf(() => suspend("usr_none", true))).toBe("not_found");
  });

  it("ends with a new password", async () => {
    const actor = person(db, "annotator", { passwordHash: await hashPassword("an old long password") });
    await signIn(actor);
    const change = (current: string) =>
      changePassword({ actor, nowMs, current, password: "a new long password" });
    await expect(change("a wrong password")).rejects.toMatchObject({ code: "invalid" });
    expect(await findActor()).toEqual(actor);
    await change("an old long password");
    expect(await findActor()).toBeNull();
    expect(await isPassword("a new long password", findUser(db, actor.id)?.passwordHash ?? null)).toBe(true);
  });

  it("is nobody's without a token, with a forged one or with one that is no token", async () => {
    const actor = person(db, "annotator");
    expect(await findActor()).toBeNull();
    expect((await requireActor("public")).role).toBe("anonymous");
    await signIn(actor, "another secret, by somebody else!");
    expect(await findActor()).toBeNull();
    cookie.value = "not a token";
    expect(await findActor()).toBeNull();
  });
});

describe("signing up and in by mail", () => {
  const input = {
    email: "isla@skerrow.example",
    name: "Isla",
    role: "requester" as const,
    teamName: "",
    password: "a few words in a row",
  };

  it("makes an account with a team of its own, confirmed by the link", async () => {
    await signUp({ input, nowMs });
    const user = findUserByEmail(db, "ISLA@skerrow.example");
    expect(user).toMatchObject({ role: "requester", emailVerifiedAtMs: null });
    const secret = secretOf("verify");
    expect(redeemSignInLink({ secret, nowMs })).toMatchObject({ id: user?.id, emailVerifiedAtMs: nowMs });
    expect(redeemSignInLink({ secret, nowMs })).toBeNull();
  });

  it("with an address that is taken makes no second account and tells its owner", async () => {
    await signUp({ input, nowMs });
    await signUp({ input: { ...input, name: "Somebody else", role: "annotator" as const }, nowMs });
    expect(db.select().from(users).all()).toHaveLength(1);
    expect(letters(db, "sign-up").map((letter) => letter.to)).toEqual([input.email]);
  });

  it("says nothing about addresses without an account, and lets no suspended person in", () => {
    sendSignInLink({ email: "nobody@skerrow.example", nowMs });
    sendResetLink({ email: "nobody@skerrow.example", nowMs });
    expect(letters(db, "sign-in")).toEqual([]);
    expect(letters(db, "reset")).toEqual([]);
    const actor = person(db, "annotator");
    sendSignInLink({ email: actor.email, nowMs });
    db.update(users).set({ status: "suspended" }).run();
    expect(redeemSignInLink({ secret: secretOf("sign-in"), nowMs })).toBeNull();
  });

  it("does not let in whoever chose the password of an address that was not theirs", async () => {
    await signUp({ input, nowMs }); // by somebody who does not read this mailbox
    sendSignInLink({ email: input.email, nowMs }); // its owner asks for a link instead
    redeemSignInLink({ secret: secretOf("sign-in"), nowMs });
    expect(findUserByEmail(db, input.email)).toMatchObject({ emailVerifiedAtMs: nowMs, passwordHash: null });
  });

  it("sets a new password by a link that works once and ends all sessions", async () => {
    const actor = person(db, "annotator");
    await signIn(actor);
    sendResetLink({ email: actor.email, nowMs });
    const secret = secretOf("reset");
    await resetPassword({ secret, password: "a new long password", nowMs });
    expect(await findActor()).toBeNull();
    const again = resetPassword({ secret, password: "another long password", nowMs });
    await expect(again).rejects.toMatchObject({ code: "gone" });
  });
});

describe("a team", () => {
  let owner: Actor;
  let teamId: string;
  beforeEach(() => {
    owner = person(db, "requester");
    teamId = team(db, owner);
  });
  const change = (actor: Actor, userId: string, role: "owner" | "editor" | "viewer" | "remove") =>
    changeMember({ actor, nowMs, teamId, userId, role });
  const invite = (actor: Actor, email: string) =>
    inviteColleague({ actor, nowMs, teamId, email, role: "editor" });

  it("keeps its last owner", () => {
    expect(refusalText(() => change(owner, owner.id, "remove"))).toMatch(/at least one owner/);
    expect(refusalOf(() => change(owner, owner.id, "viewer"))).toBe("conflict");
    const second = person(db, "requester");
    join(db, teamId, second, "editor");
    change(owner, second.id, "owner");
    change(second, owner.id, "remove");
    expect(getTeamRole(db, teamId, owner.id)).toBeUndefined();
    expect(refusalOf(() => change(second, second.id, "remove"))).toBe("conflict");
  });

  it("is changed by owners only; an outsider learns nothing of it", () => {
    const editor = person(db, "requester");
    join(db, teamId, editor, "editor");
    expect(refusalOf(() => change(editor, owner.id, "viewer"))).toBe("forbidden");
    expect(refusalOf(() => invite(editor, "new@skerrow.example"))).toBe("forbidden");
    const outsider = person(db, "requester");
    expect(refusalOf(() => change(outsider, owner.id, "viewer"))).toBe("not_found");
    expect(refusalOf(() => change(owner, outsider.id, "viewer"))).toBe("not_found");
  });

  it("shares its batches by role: a viewer looks, an editor works, an outsider finds nothing", () => {
    const viewer = person(db, "requester");
    join(db, teamId, viewer, "viewer");
    const batchId = createBatch({ actor: owner, nowMs, teamId, title: "Harrow Lane glasshouse" });
    expect(requireBatch(db, batchId, viewer).id).toBe(batchId);
    expect(requireBatch(db, batchId, person(db, "admin")).id).toBe(batchId);
    expect(refusalOf(() => requireBatch(db, batchId, viewer, "editor"))).toBe("forbidden");
    expect(refusalOf(() => createBatch({ actor: viewer, nowMs, teamId, title: "Another" }))).toBe(
      "forbidden",
    );
    const outsider = person(db, "requester");
    expect(refusalOf(() => requireBatch(db, batchId, outsider))).toBe("not_found");
    expect(refusalOf(() => createBatch({ actor: outsider, nowMs, teamId, title: "Another" }))).toBe(
      "not_found",
    );
    expect(refusalOf(() => requireBatch(db, "bat_none", owner))).toBe("not_found");
  });

  it("takes a colleague in by a link that works once", () => {
    invite(owner, "marit@skerrow.example");
    const secret = secretOf("invite");
    expect(findInvitation({ secret, nowMs })).toMatchObject({ role: "editor", hasAccount: false });
    const signInSecret = acceptInvitation({ secret, name: "Marit", nowMs });
    const marit = findUserByEmail(db, "marit@skerrow.example");
    expect(getTeamRole(db, teamId, marit?.id ?? "")).toBe("editor");
    expect(redeemSignInLink({ secret: signInSecret, nowMs })?.id).toBe(marit?.id);
    expect(refusalOf(() => acceptInvitation({ secret, name: "Marit", nowMs }))).toBe("gone");
    expect(refusalOf(() => invite(owner, "marit@skerrow.example"))).toBe("conflict");
  });

  it("does not take in by a withdrawn, a replaced or an old invitation", () => {
    invite(owner, "marit@skerrow.example");
    const replaced = secretOf("invite");
    invite(owner, "marit@skerrow.example");
    const withdrawn = secretOf("invite");
    const accept =
      (secret: string, atMs = nowMs) =>
      () =>
        acceptInvitation({ secret, name: "Marit", nowMs: atMs });
    expect(refusalOf(accept(replaced))).toBe("gone");
    expect(refusalOf(accept(withdrawn, nowMs + 8 * 86_400_000))).toBe("gone");
    const [open] = listOpenInvites(db, teamId, nowMs);
    expect(
      refusalOf(() => revokeInvite({ actor: person(db, "requester"), nowMs, inviteId: open?.id ?? "" })),
    ).toBe("not_found");
    revokeInvite({ actor: owner, nowMs, inviteId: open?.id ?? "" });
    expect(refusalOf(accept(withdrawn))).toBe("gone");
  });

  it("does not take in an account of another kind, not even one made after the invitation", () => {
    expect(refusalOf(() => invite(owner, person(db, "annotator").email))).toBe("conflict");
    invite(owner, "late@skerrow.example");
    const late = person(db, "annotator", { email: "late@skerrow.example" });
    expect(refusalOf(() => acceptInvitation({ secret: secretOf("invite"), name: "", nowMs }))).toBe(
      "conflict",
    );
    expect(getTeamRole(db, teamId, late.id)).toBeUndefined();
  });
});
