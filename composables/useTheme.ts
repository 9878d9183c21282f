export const themes = ['system', 'light', 'dark'] as const
export type Theme = (typeof themes)[number]

/** The theme lives in a cookie, so that the first byte of a page already carries it. */
export function useTheme() {
  const theme = useCookie<Theme>('lampsum-theme', { default: () => 'system', maxAge: 60 * 60 * 24 * 365, sameSite: 'lax' })
  if (!themes.includes(theme.value)) theme.value = 'system'
  return { theme }
}
