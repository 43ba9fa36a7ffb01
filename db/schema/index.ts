export * from "./people";
export * from "./batches";
export * from "./work";
export * from "./models";
export * from "./system";
export * from "./ledger";
export * from "./payments";
