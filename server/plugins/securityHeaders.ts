import { randomBytes } from 'node:crypto'

declare module 'h3' {
  interface H3EventContext {
    nonce?: string
  }
}

/** Headers on every answer, static files included, and a nonce on Nuxt's own inline scripts. */
export default defineNitroPlugin((nitro) => {
  const https = useRuntimeConfig().publicUrl.startsWith('https:')
  nitro.hooks.hook('request', (event) => {
    const nonce = randomBytes(16).toString('base64')
    event.context.nonce = nonce
    setResponseHeaders(event, securityHeaders({ nonce, dev: import.meta.dev === true, https }))
  })
  nitro.hooks.hook('render:html', (html, { event }) => {
    const { nonce } = event.context
    if (!nonce) return
    for (const part of [html.head, html.bodyPrepend, html.bodyAppend]) part.splice(0, part.length, ...part.map(piece => addNonce(piece, nonce)))
  })
})
