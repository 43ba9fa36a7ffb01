CREATE TABLE `payout_schedules` (
	`annotator_id` text PRIMARY KEY NOT NULL,
	`rhythm` text NOT NULL,
	`weekday` integer NOT NULL,
	`least_cents` integer NOT NULL,
	`due_at_ms` integer,
	`changed_at_ms` integer NOT NULL,
	FOREIGN KEY (`annotator_id`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `payout_schedules_due` ON `payout_schedules` (`due_at_ms`);--> statement-breakpoint
ALTER TABLE `payouts` ADD `scheduled_for_ms` integer;--> statement-breakpoint
CREATE UNIQUE INDEX `payouts_scheduled` ON `payouts` (`annotator_id`,`scheduled_for_ms`);