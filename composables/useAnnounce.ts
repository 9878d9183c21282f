/** A polite word to screen readers (components/shell/LiveRegion.vue speaks it). */
export function useAnnounce() {
  const message = useState('announcement', () => '')
  return {
    message,
    announce(text: string) {
      message.value = message.value === text ? `${text}\u00A0` : text
    },
  }
}
