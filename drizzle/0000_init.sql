CREATE TABLE `mail_tokens` (
	`id` text PRIMARY KEY NOT NULL,
	`secret_hash` text NOT NULL,
	`purpose` text NOT NULL,
	`email` text NOT NULL,
	`user_id` text,
	`invite_id` text,
	`created_at_ms` integer NOT NULL,
	`expires_at_ms` integer NOT NULL,
	`used_at_ms` integer,
	FOREIGN KEY (`user_id`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`invite_id`) REFERENCES `team_invites`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `mail_tokens_secret` ON `mail_tokens` (`secret_hash`);--> statement-breakpoint
CREATE INDEX `mail_tokens_email` ON `mail_tokens` (`email`,`purpose`);--> statement-breakpoint
CREATE TABLE `team_invites` (
	`id` text PRIMARY KEY NOT NULL,
	`team_id` text NOT NULL,
	`email` text NOT NULL,
	`role` text NOT NULL,
	`invited_by` text NOT NULL,
	`created_at_ms` integer NOT NULL,
	`expires_at_ms` integer NOT NULL,
	`accepted_at_ms` integer,
	`revoked_at_ms` integer,
	FOREIGN KEY (`team_id`) REFERENCES `teams`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`invited_by`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `team_invites_team` ON `team_invites` (`team_id`);--> statement-breakpoint
CREATE TABLE `team_members` (
	`team_id` text NOT NULL,
	`user_id` text NOT NULL,
	`role` text NOT NULL,
	`joined_at_ms` integer NOT NULL,
	PRIMARY KEY(`team_id`, `user_id`),
	FOREIGN KEY (`team_id`) REFERENCES `teams`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`user_id`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `team_members_user` ON `team_members` (`user_id`);--> statement-breakpoint
CREATE TABLE `teams` (
	`id` text PRIMARY KEY NOT NULL,
	`name` text NOT NULL,
	`created_at_ms` integer NOT NULL
);
--> statement-breakpoint
CREATE TABLE `users` (
	`id` text PRIMARY KEY NOT NULL,
	`email` text NOT NULL,
	`name` text NOT NULL,
	`password_hash` text,
	`role` text NOT NULL,
	`status` text DEFAULT 'active' NOT NULL,
	`email_verified_at_ms` integer,
	`session_epoch` integer DEFAULT 0 NOT NULL,
	`accepts_sensitive` integer DEFAULT false NOT NULL,
	`stripe_account_id` text,
	`payouts_enabled` integer DEFAULT false NOT NULL,
	`created_at_ms` integer NOT NULL
);
--> statement-breakpoint
CREATE UNIQUE INDEX `users_email_unique` ON `users` (`email`);--> statement-breakpoint
CREATE UNIQUE INDEX `users_stripe_account_id_unique` ON `users` (`stripe_account_id`);--> statement-breakpoint
CREATE TABLE `batches` (
	`id` text PRIMARY KEY NOT NULL,
	`team_id` text NOT NULL,
	`created_by` text NOT NULL,
	`title` text NOT NULL,
	`status` text DEFAULT 'draft' NOT NULL,
	`brief_version` integer DEFAULT 0 NOT NULL,
	`sensitive` integer DEFAULT false NOT NULL,
	`sensitive_note` text DEFAULT '' NOT NULL,
	`safety_critical` integer DEFAULT false NOT NULL,
	`k_min` integer DEFAULT 3 NOT NULL,
	`k_max` integer DEFAULT 5 NOT NULL,
	`agreement_target` real DEFAULT 0.7 NOT NULL,
	`base_cents` integer DEFAULT 5 NOT NULL,
	`box_cents` integer DEFAULT 3 NOT NULL,
	`polygon_cents` integer DEFAULT 6 NOT NULL,
	`cap_cents` integer DEFAULT 120 NOT NULL,
	`fee_bps` integer DEFAULT 1500 NOT NULL,
	`floor_hourly_cents` integer DEFAULT 1200 NOT NULL,
	`expected_instances` real DEFAULT 8 NOT NULL,
	`dispute_window_hours` integer DEFAULT 72 NOT NULL,
	`version` integer DEFAULT 1 NOT NULL,
	`created_at_ms` integer NOT NULL,
	`opened_at_ms` integer,
	`closed_at_ms` integer,
	FOREIGN KEY (`team_id`) REFERENCES `teams`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`created_by`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `batches_team` ON `batches` (`team_id`,`created_at_ms`);--> statement-breakpoint
CREATE INDEX `batches_status` ON `batches` (`status`,`opened_at_ms`);--> statement-breakpoint
CREATE TABLE `brief_examples` (
	`id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`image_id` text NOT NULL,
	`caption` text DEFAULT '' NOT NULL,
	`ordinal` integer NOT NULL,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `brief_examples_batch` ON `brief_examples` (`batch_id`,`ordinal`);--> statement-breakpoint
CREATE TABLE `brief_versions` (
	`batch_id` text NOT NULL,
	`version` integer NOT NULL,
	`markdown` text NOT NULL,
	`created_by` text NOT NULL,
	`created_at_ms` integer NOT NULL,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`created_by`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `brief_versions_key` ON `brief_versions` (`batch_id`,`version`);--> statement-breakpoint
CREATE TABLE `classes` (
	`id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`number` integer NOT NULL,
	`name` text NOT NULL,
	`colour` text NOT NULL,
	`pattern` text DEFAULT 'solid' NOT NULL,
	`geometry` text NOT NULL,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `classes_number` ON `classes` (`batch_id`,`number`);--> statement-breakpoint
CREATE UNIQUE INDEX `classes_name` ON `classes` (`batch_id`,`name`);--> statement-breakpoint
CREATE TABLE `images` (
	`id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`file_name` text NOT NULL,
	`byte_size` integer NOT NULL,
	`sha256` text NOT NULL,
	`media_type` text DEFAULT '' NOT NULL,
	`status` text DEFAULT 'awaiting' NOT NULL,
	`refusal` text,
	`upload_id` text,
	`original_key` text NOT NULL,
	`working_key` text,
	`thumb_key` text,
	`width` integer,
	`height` integer,
	`exif_orientation` integer,
	`proposal_state` text DEFAULT 'none' NOT NULL,
	`consensus_state` text DEFAULT 'none' NOT NULL,
	`slots_wanted` integer DEFAULT 0 NOT NULL,
	`current_run_id` text,
	`ordinal` integer NOT NULL,
	`created_at_ms` integer NOT NULL,
	`settled_at_ms` integer,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `images_batch` ON `images` (`batch_id`,`ordinal`);--> statement-breakpoint
CREATE INDEX `images_open` ON `images` (`batch_id`,`consensus_state`,`status`);--> statement-breakpoint
CREATE INDEX `images_hash` ON `images` (`batch_id`,`sha256`);--> statement-breakpoint
CREATE TABLE `proposal_sets` (
	`image_id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`model` text NOT NULL,
	`proposals` text NOT NULL,
	`millis` integer NOT NULL,
	`created_at_ms` integer NOT NULL,
	FOREIGN KEY (`image_id`) REFERENCES `images`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE TABLE `releases` (
	`id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`number` integer NOT NULL,
	`status` text NOT NULL,
	`requested_by` text NOT NULL,
	`storage_key` text,
	`sha256` text,
	`byte_size` integer,
	`image_count` integer,
	`instance_count` integer,
	`quality` text,
	`failure` text,
	`created_at_ms` integer NOT NULL,
	`ready_at_ms` integer,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`requested_by`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `releases_number` ON `releases` (`batch_id`,`number`);--> statement-breakpoint
CREATE TABLE `claims` (
	`id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`image_id` text NOT NULL,
	`annotator_id` text NOT NULL,
	`slot` integer NOT NULL,
	`status` text NOT NULL,
	`brief_version` integer NOT NULL,
	`claimed_at_ms` integer NOT NULL,
	`heartbeat_at_ms` integer NOT NULL,
	`expires_at_ms` integer NOT NULL,
	`ended_at_ms` integer,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`image_id`) REFERENCES `images`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`annotator_id`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `claims_slot` ON `claims` (`image_id`,`slot`) WHERE status in ('live', 'submitted');--> statement-breakpoint
CREATE UNIQUE INDEX `claims_person` ON `claims` (`image_id`,`annotator_id`) WHERE status in ('live', 'submitted');--> statement-breakpoint
CREATE INDEX `claims_annotator` ON `claims` (`annotator_id`,`status`);--> statement-breakpoint
CREATE INDEX `claims_expiry` ON `claims` (`status`,`expires_at_ms`);--> statement-breakpoint
CREATE INDEX `claims_batch` ON `claims` (`batch_id`,`status`);--> statement-breakpoint
CREATE TABLE `consensus_runs` (
	`id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`image_id` text NOT NULL,
	`origin` text NOT NULL,
	`dispute_id` text,
	`verdict` text NOT NULL,
	`agreement` real NOT NULL,
	`predicted_iou` real NOT NULL,
	`submission_ids` text NOT NULL,
	`settings` text NOT NULL,
	`result` text NOT NULL,
	`millis` integer NOT NULL,
	`created_at_ms` integer NOT NULL,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`image_id`) REFERENCES `images`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `consensus_runs_image` ON `consensus_runs` (`image_id`,`created_at_ms`);--> statement-breakpoint
CREATE INDEX `consensus_runs_batch` ON `consensus_runs` (`batch_id`,`created_at_ms`);--> statement-breakpoint
CREATE TABLE `disputes` (
	`id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`image_id` text NOT NULL,
	`submission_id` text,
	`subject` text NOT NULL,
	`kind` text NOT NULL,
	`opened_by` text,
	`reason` text NOT NULL,
	`status` text NOT NULL,
	`evidence` text NOT NULL,
	`stake_cents` integer NOT NULL,
	`opened_at_ms` integer NOT NULL,
	`due_at_ms` integer NOT NULL,
	`decision` text,
	`decision_reason` text,
	`decided_by` text,
	`decided_at_ms` integer,
	`moved_cents` integer,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`image_id`) REFERENCES `images`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`submission_id`) REFERENCES `submissions`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`opened_by`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`decided_by`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `disputes_docket` ON `disputes` (`status`,`due_at_ms`);--> statement-breakpoint
CREATE INDEX `disputes_image` ON `disputes` (`image_id`);--> statement-breakpoint
CREATE UNIQUE INDEX `disputes_one_open` ON `disputes` (`subject`) WHERE status = 'open';--> statement-breakpoint
CREATE TABLE `drafts` (
	`claim_id` text PRIMARY KEY NOT NULL,
	`version` integer NOT NULL,
	`document` text NOT NULL,
	`saved_at_ms` integer NOT NULL,
	FOREIGN KEY (`claim_id`) REFERENCES `claims`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE TABLE `submissions` (
	`id` text PRIMARY KEY NOT NULL,
	`claim_id` text NOT NULL,
	`batch_id` text NOT NULL,
	`image_id` text NOT NULL,
	`annotator_id` text NOT NULL,
	`document` text NOT NULL,
	`sha256` text NOT NULL,
	`active_seconds` real NOT NULL,
	`submitted_at_ms` integer NOT NULL,
	`scored_run_id` text,
	`quality` real,
	`pay_cents` integer,
	`fee_cents` integer,
	`paid_at_ms` integer,
	FOREIGN KEY (`claim_id`) REFERENCES `claims`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`image_id`) REFERENCES `images`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`annotator_id`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `submissions_claim_id_unique` ON `submissions` (`claim_id`);--> statement-breakpoint
CREATE INDEX `submissions_image` ON `submissions` (`image_id`);--> statement-breakpoint
CREATE INDEX `submissions_annotator` ON `submissions` (`annotator_id`,`submitted_at_ms`);--> statement-breakpoint
CREATE INDEX `submissions_batch` ON `submissions` (`batch_id`,`submitted_at_ms`);--> statement-breakpoint
CREATE TABLE `exemplar_models` (
	`id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`version` integer NOT NULL,
	`settled_images` integer NOT NULL,
	`instances` integer NOT NULL,
	`useful` integer NOT NULL,
	`ap_with` real,
	`ap_without` real,
	`model` text NOT NULL,
	`millis` integer NOT NULL,
	`created_at_ms` integer NOT NULL,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `exemplar_models_batch` ON `exemplar_models` (`batch_id`,`version`);--> statement-breakpoint
CREATE TABLE `audit_log` (
	`sequence` integer PRIMARY KEY AUTOINCREMENT NOT NULL,
	`id` text NOT NULL,
	`actor_id` text,
	`action` text NOT NULL,
	`subject` text NOT NULL,
	`detail` text NOT NULL,
	`at_ms` integer NOT NULL,
	`previous_hash` text NOT NULL,
	`hash` text NOT NULL
);
--> statement-breakpoint
CREATE UNIQUE INDEX `audit_log_id_unique` ON `audit_log` (`id`);--> statement-breakpoint
CREATE INDEX `audit_log_subject` ON `audit_log` (`subject`);--> statement-breakpoint
CREATE TABLE `jobs` (
	`id` text PRIMARY KEY NOT NULL,
	`kind` text NOT NULL,
	`unique_key` text,
	`subject` text,
	`payload` text NOT NULL,
	`status` text NOT NULL,
	`priority` integer DEFAULT 0 NOT NULL,
	`run_at_ms` integer NOT NULL,
	`attempts` integer DEFAULT 0 NOT NULL,
	`attempts_max` integer DEFAULT 8 NOT NULL,
	`locked_by` text,
	`locked_until_ms` integer,
	`progress` real DEFAULT 0 NOT NULL,
	`progress_note` text,
	`last_error` text,
	`created_at_ms` integer NOT NULL,
	`finished_at_ms` integer
);
--> statement-breakpoint
CREATE INDEX `jobs_due` ON `jobs` (`status`,`priority`,`run_at_ms`);--> statement-breakpoint
CREATE INDEX `jobs_subject` ON `jobs` (`subject`,`kind`);--> statement-breakpoint
CREATE UNIQUE INDEX `jobs_unique` ON `jobs` (`unique_key`) WHERE status in ('queued', 'running');--> statement-breakpoint
CREATE TABLE `ledger_accounts` (
	`id` text PRIMARY KEY NOT NULL,
	`kind` text NOT NULL,
	`owner_id` text,
	`balance_cents` integer DEFAULT 0 NOT NULL,
	`created_at_ms` integer NOT NULL
);
--> statement-breakpoint
CREATE TABLE `ledger_alerts` (
	`id` text PRIMARY KEY NOT NULL,
	`what` text NOT NULL,
	`detail` text NOT NULL,
	`created_at_ms` integer NOT NULL,
	`resolved_at_ms` integer
);
--> statement-breakpoint
CREATE TABLE `ledger_entries` (
	`id` integer PRIMARY KEY AUTOINCREMENT NOT NULL,
	`posting_id` text NOT NULL,
	`account_id` text NOT NULL,
	`cents` integer NOT NULL,
	`balance_cents` integer NOT NULL,
	`posted_at_ms` integer NOT NULL,
	FOREIGN KEY (`posting_id`) REFERENCES `ledger_postings`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`account_id`) REFERENCES `ledger_accounts`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `ledger_entries_account` ON `ledger_entries` (`account_id`,`id`);--> statement-breakpoint
CREATE INDEX `ledger_entries_posting` ON `ledger_entries` (`posting_id`);--> statement-breakpoint
CREATE TABLE `ledger_postings` (
	`id` text PRIMARY KEY NOT NULL,
	`source` text NOT NULL,
	`source_id` text NOT NULL,
	`kind` text NOT NULL,
	`digest` text NOT NULL,
	`linked_to` text,
	`memo` text NOT NULL,
	`posted_at_ms` integer NOT NULL
);
--> statement-breakpoint
CREATE UNIQUE INDEX `ledger_postings_cause` ON `ledger_postings` (`source`,`source_id`,`kind`);--> statement-breakpoint
CREATE INDEX `ledger_postings_time` ON `ledger_postings` (`posted_at_ms`);--> statement-breakpoint
CREATE TABLE `payouts` (
	`id` text PRIMARY KEY NOT NULL,
	`annotator_id` text NOT NULL,
	`amount_cents` integer NOT NULL,
	`status` text NOT NULL,
	`attempt` integer DEFAULT 1 NOT NULL,
	`stripe_transfer_id` text,
	`stripe_payout_id` text,
	`failure` text,
	`created_at_ms` integer NOT NULL,
	`paid_at_ms` integer,
	FOREIGN KEY (`annotator_id`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `payouts_stripe_transfer_id_unique` ON `payouts` (`stripe_transfer_id`);--> statement-breakpoint
CREATE UNIQUE INDEX `payouts_stripe_payout_id_unique` ON `payouts` (`stripe_payout_id`);--> statement-breakpoint
CREATE INDEX `payouts_annotator` ON `payouts` (`annotator_id`,`created_at_ms`);--> statement-breakpoint
CREATE TABLE `refunds` (
	`id` text PRIMARY KEY NOT NULL,
	`top_up_id` text NOT NULL,
	`team_id` text NOT NULL,
	`amount_cents` integer NOT NULL,
	`status` text NOT NULL,
	`stripe_refund_id` text,
	`failure` text,
	`created_at_ms` integer NOT NULL,
	FOREIGN KEY (`top_up_id`) REFERENCES `top_ups`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`team_id`) REFERENCES `teams`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `refunds_stripe_refund_id_unique` ON `refunds` (`stripe_refund_id`);--> statement-breakpoint
CREATE INDEX `refunds_team` ON `refunds` (`team_id`,`created_at_ms`);--> statement-breakpoint
CREATE TABLE `stripe_events` (
	`id` text PRIMARY KEY NOT NULL,
	`type` text NOT NULL,
	`account` text,
	`payload` text NOT NULL,
	`received_at_ms` integer NOT NULL,
	`processed_at_ms` integer
);
--> statement-breakpoint
CREATE TABLE `top_ups` (
	`id` text PRIMARY KEY NOT NULL,
	`team_id` text NOT NULL,
	`created_by` text NOT NULL,
	`amount_cents` integer NOT NULL,
	`status` text NOT NULL,
	`stripe_session_id` text,
	`stripe_payment_intent_id` text,
	`stripe_charge_id` text,
	`refunded_cents` integer DEFAULT 0 NOT NULL,
	`created_at_ms` integer NOT NULL,
	`paid_at_ms` integer,
	FOREIGN KEY (`team_id`) REFERENCES `teams`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`created_by`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE UNIQUE INDEX `top_ups_stripe_session_id_unique` ON `top_ups` (`stripe_session_id`);--> statement-breakpoint
CREATE INDEX `top_ups_team` ON `top_ups` (`team_id`,`created_at_ms`);--> statement-breakpoint
CREATE INDEX `top_ups_intent` ON `top_ups` (`stripe_payment_intent_id`);