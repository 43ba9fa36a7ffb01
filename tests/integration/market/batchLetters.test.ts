import { beforeEach, expect, it } from "vitest";
import type { Db } from "@/db/client";
import { freshDb } from "../../support/db";
import { letters, openMarket, settledImage } from "../../support/market";

let db: Db;
beforeEach(() => {
  db = freshDb();
});

it("tells the team when a batch opens", () => {
  const market = openMarket(db);
  expect(letters(db, "batch-open").map((letter) => letter.to)).toEqual([market.owner.email]);
});

it("tells the team once, when the last picture of a batch is settled", () => {
  settledImage(openMarket(db));
  expect(letters(db, "batch-settled")).toHaveLength(1);
});
