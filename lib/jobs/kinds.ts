/** Every kind of background work with what it is told. Payloads hold ids, never copies of rows. */
export type JobPayloads = {
  "mail.send": { to: string; subject: string; html: string; text: string; tag: string };
  "image.check": { imageId: string };
  "image.propose": { imageId: string };
  "consensus.settle": { imageId: string };
  "batch.train": { batchId: string };
  "release.build": { releaseId: string };
  "claims.sweep": Record<string, never>;
  "payouts.schedule": Record<string, never>;
  "consensus.overdue": Record<string, never>;
  "payout.run": { payoutId: string };
  "refund.run": { refundId: string };
  "stripe.event": { eventId: string };
  "ledger.reconcile": Record<string, never>;
};

export type JobKind = keyof JobPayloads;
