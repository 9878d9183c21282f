/** Resolved values of design tokens for canvases, read again when the theme changes. */
export function useTokenColours<N extends string>(names: readonly N[]) {
  const { theme } = useTheme()
  const colours = ref(Object.fromEntries(names.map(name => [name, ''])) as Record<N, string>)

  function read() {
    const style = getComputedStyle(document.documentElement)
    colours.value = Object.fromEntries(names.map(name => [name, style.getPropertyValue(`--${name}`).trim()])) as Record<N, string>
  }
  onMounted(() => {
    read()
    const query = matchMedia('(prefers-color-scheme: dark)')
    query.addEventListener('change', read)
    onBeforeUnmount(() => query.removeEventListener('change', read))
  })
  watch(theme, () => nextTick(read), { flush: 'post' })
  return colours
}
