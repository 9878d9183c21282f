/** Live events: ids come from a database table, so a browser can ask for what it missed (Last-Event-ID). */
export const eventTypes = ['job', 'upload', 'acquisition', 'runner'] as const
export type EventType = (typeof eventTypes)[number]

/** Sent in place of events that are gone: the client must load its lists again. */
export const resyncEvent = 'resync'
export const heartbeatSeconds = 15
/** Events are kept this long for replay. */
export const eventRetentionHours = 24
