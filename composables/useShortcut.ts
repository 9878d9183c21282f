interface Shortcut { key: string, label: string }

/** Single-key shortcuts, listed in the keyboard help, switched off there by those whose aids type for them. */
export function useShortcuts() {
  const on = useCookie<boolean>('lampsum-keys', { default: () => true, maxAge: 60 * 60 * 24 * 365, sameSite: 'lax' })
  const list = useState<Shortcut[]>('shortcuts', () => [])
  return { on, list }
}

export function isTyping(target: EventTarget | null): boolean {
  return target instanceof HTMLElement && (target.isContentEditable || ['INPUT', 'TEXTAREA', 'SELECT'].includes(target.tagName))
}

export function useShortcut(key: string, label: string, act: (event: KeyboardEvent) => void) {
  const { on, list } = useShortcuts()
  function pressed(event: KeyboardEvent) {
    if (!on.value || event.key !== key || event.ctrlKey || event.metaKey || event.altKey || event.defaultPrevented || isTyping(event.target)) return
    event.preventDefault()
    act(event)
  }
  onMounted(() => {
    list.value = [...list.value, { key, label }]
    addEventListener('keydown', pressed)
  })
  onBeforeUnmount(() => {
    list.value = list.value.filter(entry => entry.key !== key)
    removeEventListener('keydown', pressed)
  })
}
