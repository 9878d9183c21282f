const hourMs = 3600_000

/** Once an hour, and soon after the start: forgets what has run out. */
export default defineNitroPlugin((nitro) => {
  const sweep = () => forgetOldRows(useDatabase()).catch(error => console.error('[housekeeping] Old rows could not be deleted; the next try is in an hour:', error))
  const timers = [setTimeout(sweep, 60_000), setInterval(sweep, hourMs)]
  nitro.hooks.hook('close', () => timers.forEach(clearTimeout))
})
