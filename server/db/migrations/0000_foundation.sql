CREATE TABLE `account_links` (
	`token_hash` varchar(64) NOT NULL,
	`kind` varchar(16) NOT NULL,
	`user_id` varchar(36) NOT NULL,
	`created_at` datetime(3) NOT NULL,
	`expires_at` datetime(3) NOT NULL,
	`used_at` datetime(3),
	CONSTRAINT `account_links_token_hash` PRIMARY KEY(`token_hash`)
);
--> statement-breakpoint
CREATE TABLE `acquisitions` (
	`id` varchar(36) NOT NULL,
	`number` int NOT NULL,
	`campaign_id` varchar(36) NOT NULL,
	`title` varchar(160) NOT NULL,
	`notes` text,
	`camera_profile_id` varchar(36),
	`frame_exposure_seconds` double,
	`transfer` varchar(16) NOT NULL,
	`code_range` varchar(16) NOT NULL,
	`millimetres_per_pixel` double,
	`guard_seconds` double NOT NULL,
	`plan` longtext NOT NULL,
	`auto_run` boolean NOT NULL,
	`channels` longtext,
	`created_by` varchar(36) NOT NULL,
	`created_at` datetime(3) NOT NULL,
	`updated_at` datetime(3) NOT NULL,
	CONSTRAINT `acquisitions_id` PRIMARY KEY(`id`),
	CONSTRAINT `acquisitions_number` UNIQUE(`number`)
);
--> statement-breakpoint
CREATE TABLE `alignments` (
	`acquisition_id` varchar(36) NOT NULL,
	`version` int NOT NULL,
	`offset_seconds` double NOT NULL,
	`drift_ppm` double NOT NULL,
	`residual` double NOT NULL,
	`confidence` double NOT NULL,
	`method` varchar(16) NOT NULL,
	`evidence` longtext,
	`accepted` boolean NOT NULL,
	`author_id` varchar(36),
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `alignments_acquisition_id_version_pk` PRIMARY KEY(`acquisition_id`,`version`)
);
--> statement-breakpoint
CREATE TABLE `api_tokens` (
	`id` varchar(36) NOT NULL,
	`user_id` varchar(36) NOT NULL,
	`name` varchar(120) NOT NULL,
	`token_hash` varchar(64) NOT NULL,
	`created_at` datetime(3) NOT NULL,
	`last_used_at` datetime(3),
	`revoked_at` datetime(3),
	CONSTRAINT `api_tokens_id` PRIMARY KEY(`id`),
	CONSTRAINT `api_tokens_hash` UNIQUE(`token_hash`)
);
--> statement-breakpoint
CREATE TABLE `audit_entries` (
	`id` bigint AUTO_INCREMENT NOT NULL,
	`user_id` varchar(36),
	`action` varchar(64) NOT NULL,
	`subject` varchar(120),
	`details` longtext,
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `audit_entries_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `camera_profiles` (
	`id` varchar(36) NOT NULL,
	`name` varchar(120) NOT NULL,
	`frame_rate_hz` double,
	`frame_exposure_seconds` double,
	`transfer` varchar(16) NOT NULL,
	`code_range` varchar(16) NOT NULL,
	`millimetres_per_pixel` double,
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `camera_profiles_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `campaign_guests` (
	`campaign_id` varchar(36) NOT NULL,
	`user_id` varchar(36) NOT NULL,
	`granted_by` varchar(36) NOT NULL,
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `campaign_guests_campaign_id_user_id_pk` PRIMARY KEY(`campaign_id`,`user_id`)
);
--> statement-breakpoint
CREATE TABLE `campaigns` (
	`id` varchar(36) NOT NULL,
	`name` varchar(160) NOT NULL,
	`specimen` varchar(240),
	`notes` text,
	`created_by` varchar(36) NOT NULL,
	`created_at` datetime(3) NOT NULL,
	`updated_at` datetime(3) NOT NULL,
	CONSTRAINT `campaigns_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `cut_lists` (
	`acquisition_id` varchar(36) NOT NULL,
	`version` int NOT NULL,
	`alignment_version` int NOT NULL,
	`cut_groups` longtext NOT NULL,
	`author_id` varchar(36),
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `cut_lists_acquisition_id_version_pk` PRIMARY KEY(`acquisition_id`,`version`)
);
--> statement-breakpoint
CREATE TABLE `event_counter` (
	`id` int NOT NULL,
	`value` bigint NOT NULL,
	CONSTRAINT `event_counter_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `events` (
	`id` bigint NOT NULL,
	`type` varchar(16) NOT NULL,
	`campaign_id` varchar(36),
	`payload` longtext NOT NULL,
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `events_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `frame_set_files` (
	`frame_set_id` varchar(36) NOT NULL,
	`name` varchar(120) NOT NULL,
	`bytes` bigint NOT NULL,
	`sha256` varchar(64) NOT NULL,
	`content_type` varchar(80) NOT NULL,
	`file_key` varchar(255) NOT NULL,
	CONSTRAINT `frame_set_files_frame_set_id_name_pk` PRIMARY KEY(`frame_set_id`,`name`)
);
--> statement-breakpoint
CREATE TABLE `frame_sets` (
	`id` varchar(36) NOT NULL,
	`acquisition_id` varchar(36) NOT NULL,
	`line` int NOT NULL,
	`frequency_hz` double NOT NULL,
	`state` varchar(16) NOT NULL,
	`cut_list_version` int NOT NULL,
	`checks` longtext NOT NULL,
	`set_groups` longtext NOT NULL,
	`width` int NOT NULL,
	`height` int NOT NULL,
	`superseded_at` datetime(3),
	`released_by` varchar(36),
	`released_at` datetime(3),
	`release_note` text,
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `frame_sets_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `jobs` (
	`id` varchar(36) NOT NULL,
	`stage` varchar(16) NOT NULL,
	`acquisition_id` varchar(36) NOT NULL,
	`upload_id` varchar(36),
	`state` varchar(16) NOT NULL,
	`active_key` varchar(96),
	`inputs_key` varchar(64),
	`priority` int NOT NULL,
	`queued_at` datetime(3) NOT NULL,
	`not_before` datetime(3) NOT NULL,
	`attempts` int NOT NULL,
	`crashes` int NOT NULL,
	`runner_id` varchar(36),
	`lease_until` datetime(3),
	`cancel_requested` varchar(8),
	`progress` double NOT NULL,
	`frames_per_second` double,
	`eta_seconds` double,
	`message` text,
	`error_code` varchar(64),
	`log` text,
	`created_at` datetime(3) NOT NULL,
	`started_at` datetime(3),
	`finished_at` datetime(3),
	CONSTRAINT `jobs_id` PRIMARY KEY(`id`),
	CONSTRAINT `jobs_active` UNIQUE(`active_key`)
);
--> statement-breakpoint
CREATE TABLE `runners` (
	`id` varchar(36) NOT NULL,
	`name` varchar(80) NOT NULL,
	`host` varchar(120) NOT NULL,
	`pid` int NOT NULL,
	`cores` int NOT NULL,
	`slots` int NOT NULL,
	`version` varchar(40) NOT NULL,
	`started_at` datetime(3) NOT NULL,
	`beat_at` datetime(3) NOT NULL,
	`stopped_at` datetime(3),
	CONSTRAINT `runners_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `sessions` (
	`id` varchar(64) NOT NULL,
	`user_id` varchar(36) NOT NULL,
	`created_at` datetime(3) NOT NULL,
	`last_seen_at` datetime(3) NOT NULL,
	`expires_at` datetime(3) NOT NULL,
	`user_agent` varchar(255),
	CONSTRAINT `sessions_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `settings` (
	`name` varchar(64) NOT NULL,
	`value` longtext NOT NULL,
	CONSTRAINT `settings_name` PRIMARY KEY(`name`)
);
--> statement-breakpoint
CREATE TABLE `stage_outputs` (
	`acquisition_id` varchar(36) NOT NULL,
	`stage` varchar(16) NOT NULL,
	`job_id` varchar(36),
	`inputs_key` varchar(64) NOT NULL,
	`output_key` varchar(64) NOT NULL,
	`facts` longtext NOT NULL,
	`files` longtext NOT NULL,
	`flags` longtext NOT NULL,
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `stage_outputs_acquisition_id_stage_pk` PRIMARY KEY(`acquisition_id`,`stage`)
);
--> statement-breakpoint
CREATE TABLE `uploads` (
	`id` varchar(36) NOT NULL,
	`acquisition_id` varchar(36) NOT NULL,
	`user_id` varchar(36) NOT NULL,
	`kind` varchar(8) NOT NULL,
	`part` int NOT NULL,
	`filename` varchar(255) NOT NULL,
	`filetype` varchar(120),
	`bytes` bigint NOT NULL,
	`received_bytes` bigint NOT NULL,
	`state` varchar(16) NOT NULL,
	`sha256` varchar(64),
	`file_key` varchar(255),
	`message` text,
	`created_at` datetime(3) NOT NULL,
	`last_activity_at` datetime(3) NOT NULL,
	`stored_at` datetime(3),
	CONSTRAINT `uploads_id` PRIMARY KEY(`id`)
);
--> statement-breakpoint
CREATE TABLE `users` (
	`id` varchar(36) NOT NULL,
	`email` varchar(254) NOT NULL,
	`name` varchar(120) NOT NULL,
	`role` varchar(16) NOT NULL,
	`password_hash` varchar(255),
	`demo` boolean NOT NULL DEFAULT false,
	`disabled_at` datetime(3),
	`created_at` datetime(3) NOT NULL,
	CONSTRAINT `users_id` PRIMARY KEY(`id`),
	CONSTRAINT `users_email` UNIQUE(`email`)
);
--> statement-breakpoint
ALTER TABLE `account_links` ADD CONSTRAINT `account_links_user_id_users_id_fk` FOREIGN KEY (`user_id`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `acquisitions` ADD CONSTRAINT `acquisitions_campaign_id_campaigns_id_fk` FOREIGN KEY (`campaign_id`) REFERENCES `campaigns`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `acquisitions` ADD CONSTRAINT `acquisitions_camera_profile_id_camera_profiles_id_fk` FOREIGN KEY (`camera_profile_id`) REFERENCES `camera_profiles`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `acquisitions` ADD CONSTRAINT `acquisitions_created_by_users_id_fk` FOREIGN KEY (`created_by`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `alignments` ADD CONSTRAINT `alignments_acquisition_id_acquisitions_id_fk` FOREIGN KEY (`acquisition_id`) REFERENCES `acquisitions`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `alignments` ADD CONSTRAINT `alignments_author_id_users_id_fk` FOREIGN KEY (`author_id`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `api_tokens` ADD CONSTRAINT `api_tokens_user_id_users_id_fk` FOREIGN KEY (`user_id`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `audit_entries` ADD CONSTRAINT `audit_entries_user_id_users_id_fk` FOREIGN KEY (`user_id`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `campaign_guests` ADD CONSTRAINT `campaign_guests_campaign_id_campaigns_id_fk` FOREIGN KEY (`campaign_id`) REFERENCES `campaigns`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `campaign_guests` ADD CONSTRAINT `campaign_guests_user_id_users_id_fk` FOREIGN KEY (`user_id`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `campaign_guests` ADD CONSTRAINT `campaign_guests_granted_by_users_id_fk` FOREIGN KEY (`granted_by`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `campaigns` ADD CONSTRAINT `campaigns_created_by_users_id_fk` FOREIGN KEY (`created_by`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `cut_lists` ADD CONSTRAINT `cut_lists_acquisition_id_acquisitions_id_fk` FOREIGN KEY (`acquisition_id`) REFERENCES `acquisitions`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `cut_lists` ADD CONSTRAINT `cut_lists_author_id_users_id_fk` FOREIGN KEY (`author_id`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `frame_set_files` ADD CONSTRAINT `frame_set_files_frame_set_id_frame_sets_id_fk` FOREIGN KEY (`frame_set_id`) REFERENCES `frame_sets`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `frame_sets` ADD CONSTRAINT `frame_sets_acquisition_id_acquisitions_id_fk` FOREIGN KEY (`acquisition_id`) REFERENCES `acquisitions`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `frame_sets` ADD CONSTRAINT `frame_sets_released_by_users_id_fk` FOREIGN KEY (`released_by`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `jobs` ADD CONSTRAINT `jobs_acquisition_id_acquisitions_id_fk` FOREIGN KEY (`acquisition_id`) REFERENCES `acquisitions`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `jobs` ADD CONSTRAINT `jobs_upload_id_uploads_id_fk` FOREIGN KEY (`upload_id`) REFERENCES `uploads`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `sessions` ADD CONSTRAINT `sessions_user_id_users_id_fk` FOREIGN KEY (`user_id`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `stage_outputs` ADD CONSTRAINT `stage_outputs_acquisition_id_acquisitions_id_fk` FOREIGN KEY (`acquisition_id`) REFERENCES `acquisitions`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `uploads` ADD CONSTRAINT `uploads_acquisition_id_acquisitions_id_fk` FOREIGN KEY (`acquisition_id`) REFERENCES `acquisitions`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
ALTER TABLE `uploads` ADD CONSTRAINT `uploads_user_id_users_id_fk` FOREIGN KEY (`user_id`) REFERENCES `users`(`id`) ON DELETE no action ON UPDATE no action;--> statement-breakpoint
CREATE INDEX `account_links_user` ON `account_links` (`user_id`);--> statement-breakpoint
CREATE INDEX `acquisitions_campaign` ON `acquisitions` (`campaign_id`,`number`);--> statement-breakpoint
CREATE INDEX `acquisitions_created` ON `acquisitions` (`created_at`,`id`);--> statement-breakpoint
CREATE INDEX `api_tokens_user` ON `api_tokens` (`user_id`);--> statement-breakpoint
CREATE INDEX `campaigns_created` ON `campaigns` (`created_at`,`id`);--> statement-breakpoint
CREATE INDEX `events_created` ON `events` (`created_at`);--> statement-breakpoint
CREATE INDEX `frame_sets_acquisition` ON `frame_sets` (`acquisition_id`,`line`);--> statement-breakpoint
CREATE INDEX `frame_sets_created` ON `frame_sets` (`created_at`,`id`);--> statement-breakpoint
CREATE INDEX `jobs_claim` ON `jobs` (`state`,`priority`,`queued_at`,`id`);--> statement-breakpoint
CREATE INDEX `jobs_lease` ON `jobs` (`state`,`lease_until`);--> statement-breakpoint
CREATE INDEX `jobs_acquisition` ON `jobs` (`acquisition_id`,`stage`,`created_at`);--> statement-breakpoint
CREATE INDEX `jobs_created` ON `jobs` (`created_at`,`id`);--> statement-breakpoint
CREATE INDEX `sessions_user` ON `sessions` (`user_id`);--> statement-breakpoint
CREATE INDEX `uploads_acquisition` ON `uploads` (`acquisition_id`,`kind`,`part`);--> statement-breakpoint
CREATE INDEX `uploads_state` ON `uploads` (`state`,`last_activity_at`);