/** Streams never end by themselves: without this a stop would wait out Nitro's 30 seconds. */
export default defineNitroPlugin((nitro) => {
  for (const signal of ['SIGTERM', 'SIGINT'] as const) process.once(signal, closeEventStreams)
  nitro.hooks.hook('close', closeEventStreams)
  // The start script is gone (kill -9): stop too, in good order.
  if (process.channel) process.once('disconnect', () => process.kill(process.pid, 'SIGTERM'))
})
