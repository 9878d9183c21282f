ALTER TABLE `alignments` MODIFY COLUMN `residual` double;--> statement-breakpoint
ALTER TABLE `alignments` MODIFY COLUMN `confidence` double;--> statement-breakpoint
ALTER TABLE `acquisitions` ADD `run_requested_at` datetime(3);