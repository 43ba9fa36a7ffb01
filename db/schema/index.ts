export * from "./people";
export * from "./batches";
export * from "./work";
export * from "./system";
export * from "./ledger";
export * from "./payments";
