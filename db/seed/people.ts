import { inTransaction, type Db } from "@/db/client";
import { teamMembers, teams, users } from "@/db/schema";
import type { Actor, Role } from "@/lib/auth/actor";
import { hashPassword } from "@/lib/auth/password";
import { newId } from "@/lib/ids";

/** One password for every demo account; the start command prints it. */
export const DEMO_PASSWORD = "wrack-line-2026";

type Person = { name: string; email: string; role: Role };

/** Invented people. */
export const PEOPLE = {
  ines: { name: "Ines Calder", email: "ines.calder@skerrow.example", role: "requester" },
  rowan: { name: "Rowan Teale", email: "rowan.teale@skerrow.example", role: "requester" },
  petra: { name: "Petra Oake", email: "petra.oake@skerrow.example", role: "requester" },
  ada: { name: "Ada Merrin", email: "ada.merrin@merestone.example", role: "admin" },
  edda: { name: "Edda Rook", email: "edda.rook@merestone.example", role: "admin" },
  corin: { name: "Corin Vale", email: "corin.vale@merestone.example", role: "admin" },
  tomas: { name: "Tomas Brandt", email: "tomas.brandt@skerrow.example", role: "annotator" },
  lioba: { name: "Lioba Fenn", email: "lioba.fenn@skerrow.example", role: "annotator" },
  maren: { name: "Maren Holt", email: "maren.holt@skerrow.example", role: "annotator" },
  jory: { name: "Jory Penhale", email: "jory.penhale@skerrow.example", role: "annotator" },
  sanna: { name: "Sanna Aho", email: "sanna.aho@skerrow.example", role: "annotator" },
  kofi: { name: "Kofi Ansah", email: "kofi.ansah@skerrow.example", role: "annotator" },
  elin: { name: "Elin Strand", email: "elin.strand@skerrow.example", role: "annotator" },
  bram: { name: "Bram Oosting", email: "bram.oosting@skerrow.example", role: "annotator" },
} as const satisfies Record<string, Person>;

export type PersonKey = keyof typeof PEOPLE;

/** The annotators with their care, which the seeded drawings follow: people differ. */
export const CARE = {
  tomas: "careful",
  lioba: "careful",
  maren: "steady",
  jory: "steady",
  sanna: "steady",
  kofi: "hasty",
  elin: "hasty",
  bram: "careless",
} as const;

export type AnnotatorKey = keyof typeof CARE;

export type Cast = { actors: Record<PersonKey, Actor>; teamId: string };

/** Makes the demo's people and the requester's team. */
export async function seedPeople(db: Db, nowMs: number): Promise<Cast> {
  const passwordHash = await hashPassword(DEMO_PASSWORD);
  const teamId = newId("tem");
  const actors: Partial<Record<PersonKey, Actor>> = {};
  inTransaction(db, (tx) => {
    tx.insert(teams).values({ id: teamId, name: "Skerrow Bay Shore Trust", createdAtMs: nowMs }).run();
    for (const [key, { name, email, role }] of Object.entries(PEOPLE)) {
      const id = newId("usr");
      tx.insert(users)
        .values({ id, email, name, role, passwordHash, emailVerifiedAtMs: nowMs, createdAtMs: nowMs })
        .run();
      actors[key as PersonKey] = { id, role, name, email };
    }
    const members = { ines: "owner", rowan: "editor", petra: "viewer" } as const;
    for (const [key, role] of Object.entries(members)) {
      tx.insert(teamMembers)
        .values({ teamId, userId: actors[key as PersonKey]?.id ?? "", role, joinedAtMs: nowMs })
        .run();
    }
  });
  return { actors: actors as Record<PersonKey, Actor>, teamId };
}
