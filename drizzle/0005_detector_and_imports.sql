CREATE TABLE `imported_predictions` (
	`image_id` text PRIMARY KEY NOT NULL,
	`batch_id` text NOT NULL,
	`predictions` text NOT NULL,
	FOREIGN KEY (`image_id`) REFERENCES `images`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
CREATE INDEX `imported_predictions_batch` ON `imported_predictions` (`batch_id`);--> statement-breakpoint
CREATE TABLE `prediction_imports` (
	`batch_id` text PRIMARY KEY NOT NULL,
	`file_name` text NOT NULL,
	`imported_by` text NOT NULL,
	`used` integer NOT NULL,
	`wrong_count` integer NOT NULL,
	`wrong` text NOT NULL,
	`created_at_ms` integer NOT NULL,
	FOREIGN KEY (`batch_id`) REFERENCES `batches`(`id`) ON UPDATE no action ON DELETE no action,
	FOREIGN KEY (`imported_by`) REFERENCES `users`(`id`) ON UPDATE no action ON DELETE no action
);
--> statement-breakpoint
ALTER TABLE `classes` ADD `detector_label` text;--> statement-breakpoint
ALTER TABLE `exemplar_models` ADD `recall_with_detector` real;--> statement-breakpoint
ALTER TABLE `exemplar_models` ADD `recall_without_detector` real;