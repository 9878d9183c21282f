import type { Permission } from '#shared/permissions'

declare module '#app' {
  interface PageMeta {
    /** Shown without sign-in. */
    public?: boolean
    /** What the reader's role must be allowed to do. */
    permission?: Permission
  }
}
declare module 'vue-router' {
  interface RouteMeta {
    public?: boolean
    permission?: Permission
  }
}
