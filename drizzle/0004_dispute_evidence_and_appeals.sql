CREATE TABLE `dispute_evidence` (
	`dispute_id` text PRIMARY KEY NOT NULL,
	`snapshot` text NOT NULL,
	`sha256` text NOT NULL,
	`frozen_at_ms` integer NOT NULL,
	FOREIGN KEY (`dispute_id`) REFERENCES `disputes`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE TABLE `dispute_steps` (
	`id` integer PRIMARY KEY AUTOINCREMENT NOT NULL,
	`dispute_id` text NOT NULL,
	`kind` text NOT NULL,
	`actor_id` text,
	`reason` text DEFAULT '' NOT NULL,
	`at_ms` integer NOT NULL,
	FOREIGN KEY (`dispute_id`) REFERENCES `disputes`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`actor_id`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `dispute_steps_dispute` ON `dispute_steps` (`dispute_id`,`id`);--> statement-breakpoint
ALTER TABLE `disputes` ADD `error_kind` text DEFAULT 'other' NOT NULL;--> statement-breakpoint
ALTER TABLE `disputes` ADD `class_id` text;--> statement-breakpoint
ALTER TABLE `disputes` ADD `appeal_of` text;--> statement-breakpoint
ALTER TABLE `disputes` ADD `proposal` text;--> statement-breakpoint
ALTER TABLE `disputes` ADD `proposal_reason` text;--> statement-breakpoint
ALTER TABLE `disputes` ADD `proposed_by` text REFERENCES users(id);--> statement-breakpoint
ALTER TABLE `disputes` ADD `proposed_at_ms` integer;--> statement-breakpoint
ALTER TABLE `disputes` ADD `confirmed_by` text REFERENCES users(id);--> statement-breakpoint
ALTER TABLE `disputes` ADD `cited_ids` text DEFAULT '[]' NOT NULL;--> statement-breakpoint
CREATE UNIQUE INDEX `disputes_one_appeal` ON `disputes` (`appeal_of`) WHERE status <> 'withdrawn';--> statement-breakpoint
CREATE TRIGGER dispute_evidence_no_update BEFORE UPDATE ON dispute_evidence BEGIN SELECT RAISE(ABORT, 'evidence is frozen'); END;
--> statement-breakpoint
CREATE TRIGGER dispute_evidence_no_delete BEFORE DELETE ON dispute_evidence BEGIN SELECT RAISE(ABORT, 'evidence is frozen'); END;
--> statement-breakpoint
CREATE TRIGGER dispute_steps_no_update BEFORE UPDATE ON dispute_steps BEGIN SELECT RAISE(ABORT, 'steps are only ever added'); END;
--> statement-breakpoint
CREATE TRIGGER dispute_steps_no_delete BEFORE DELETE ON dispute_steps BEGIN SELECT RAISE(ABORT, 'steps are only ever added'); END;
