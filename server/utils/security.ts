import { LampsumError } from '#shared/errors'
import { routes } from '#shared/routes'

const patterns = Object.keys(routes).map((key) => {
  const [method, path] = key.split(' ') as [string, string]
  return { method, path: new RegExp(`^${path.replaceAll('.', '\\.').replaceAll(/:\w+/g, '[^/]+')}$`) }
})

/** Whether the route table has this call. Without the check, a page would be rendered for a mistyped address. */
export function isKnownRoute(method: string, path: string): boolean {
  return patterns.some(each => each.method === method && each.path.test(path))
}

export interface RequestOrigin {
  method: string
  /** Sec-Fetch-Site: every current browser sends it, and pages cannot forge it. */
  fetchSite?: string
  origin?: string
  host?: string
  publicUrl: string
}

const readingMethods = ['GET', 'HEAD', 'OPTIONS']

/** Refuses what another site makes a browser send with our cookie. Scripts send neither header and pass. */
export function refuseCrossSite({ method, fetchSite, origin, host, publicUrl }: RequestOrigin): void {
  if (readingMethods.includes(method)) return
  if (fetchSite !== undefined && fetchSite !== 'same-origin' && fetchSite !== 'none') throw new LampsumError('cross-site')
  if (origin === undefined) return
  const ours = URL.canParse(origin) && [host, new URL(publicUrl).host].includes(new URL(origin).host)
  if (!ours) throw new LampsumError('cross-site')
}

/**
 * Scripts run from our own files, or inline with this answer's nonce (Nuxt's page data). Styles may be inline: Nuxt
 * renders `style` attributes, which cannot carry a nonce.
 */
export function contentSecurityPolicy({ nonce, dev, https }: { nonce: string, dev: boolean, https: boolean }): string {
  return [
    'default-src \'self\'',
    `script-src 'self' 'nonce-${nonce}'`,
    'style-src \'self\' \'unsafe-inline\'',
    'img-src \'self\' data: blob:',
    'font-src \'self\' data:',
    `connect-src 'self'${dev ? ' ws: wss:' : ''}`,
    'worker-src \'self\' blob:',
    'object-src \'none\'',
    'base-uri \'none\'',
    'form-action \'self\'',
    'frame-ancestors \'none\'',
    ...(https ? ['upgrade-insecure-requests'] : []),
  ].join('; ')
}

export function securityHeaders(options: { nonce: string, dev: boolean, https: boolean }): Record<string, string> {
  return {
    'content-security-policy': contentSecurityPolicy(options),
    'x-content-type-options': 'nosniff',
    'x-frame-options': 'DENY',
    // The links sent by e-mail hold a secret: no other site learns of it. Not no-referrer: it would blank Origin too.
    'referrer-policy': 'same-origin',
    'cross-origin-opener-policy': 'same-origin',
    'cross-origin-resource-policy': 'same-origin',
    'permissions-policy': 'camera=(), microphone=(), geolocation=(), payment=(), usb=()',
    ...(options.https ? { 'strict-transport-security': 'max-age=31536000' } : {}),
  }
}

/** Adds the nonce to each script of a piece of HTML that Nuxt has made (never to what components rendered). */
export const addNonce = (html: string, nonce: string) => html.replaceAll(/<script(?=[\s>])(?![^>]*\snonce=)/g, `<script nonce="${nonce}"`)

export const largestJsonBytes = 1_000_000
