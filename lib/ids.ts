import { randomBytes } from "node:crypto";

const ALPHABET = "0123456789abcdefghjkmnpqrstvwxyz"; // Crockford's base 32: no i, l, o, u to misread

/** Prefix of every kind of row, so that an id says what it is wherever it turns up. */
export type IdPrefix =
  | "usr"
  | "tem"
  | "inv"
  | "tok"
  | "bat"
  | "cls"
  | "exa"
  | "img"
  | "pps"
  | "clm"
  | "sub"
  | "run"
  | "dsp"
  | "rel"
  | "acc"
  | "pst"
  | "ent"
  | "pay"
  | "out"
  | "job"
  | "aud"
  | "evt"
  | "imp"
  | "mdl";

/** A new id, `prefix_` and 22 characters: 110 random bits, unguessable on the wire. */
export function newId(prefix: IdPrefix): string {
  const bytes = randomBytes(22);
  let text = "";
  for (const byte of bytes) text += ALPHABET[byte & 31];
  return `${prefix}_${text}`;
}
