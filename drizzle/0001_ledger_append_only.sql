CREATE TRIGGER ledger_postings_no_update BEFORE UPDATE ON ledger_postings BEGIN SELECT RAISE(ABORT, 'postings are append-only'); END;
--> statement-breakpoint
CREATE TRIGGER ledger_postings_no_delete BEFORE DELETE ON ledger_postings BEGIN SELECT RAISE(ABORT, 'postings are append-only'); END;
--> statement-breakpoint
CREATE TRIGGER ledger_entries_no_update BEFORE UPDATE ON ledger_entries BEGIN SELECT RAISE(ABORT, 'entries are append-only'); END;
--> statement-breakpoint
CREATE TRIGGER ledger_entries_no_delete BEFORE DELETE ON ledger_entries BEGIN SELECT RAISE(ABORT, 'entries are append-only'); END;
--> statement-breakpoint
CREATE TRIGGER consensus_runs_no_update BEFORE UPDATE ON consensus_runs BEGIN SELECT RAISE(ABORT, 'runs are only ever added'); END;
--> statement-breakpoint
CREATE TRIGGER audit_log_no_update BEFORE UPDATE ON audit_log BEGIN SELECT RAISE(ABORT, 'the audit log is append-only'); END;
--> statement-breakpoint
CREATE TRIGGER audit_log_no_delete BEFORE DELETE ON audit_log BEGIN SELECT RAISE(ABORT, 'the audit log is append-only'); END;
