INSERT IGNORE INTO `event_counter` (`id`, `value`) VALUES (1, 0);
