import type { Config } from 'tailwindcss'

const token = (name: string) => `var(--${name})`

/** Steps of 4 px whatever the type size, so that rules and text keep one left edge. */
const steps = [0, 0.5, 1, 1.5, 2, 2.5, 3, 3.5, 4, 5, 6, 7, 8, 9, 10, 11, 12, 16]
const spacing = { px: '1px', ...Object.fromEntries(steps.map(step => [step, `${step * 4}px`])) }

/** Only what the design tokens hold: no default palette, no shadows, one radius. */
export default {
  content: ['./app.vue', './error.vue', './layouts/**/*.vue', './pages/**/*.vue', './components/**/*.vue', './composables/**/*.ts'],
  theme: {
    spacing,
    colors: {
      'transparent': 'transparent',
      'current': 'currentColor',
      'paper': token('paper'), 'sheet': token('sheet'), 'well': token('well'), 'rule': token('rule'), 'rule-strong': token('rule-strong'),
      'ink': token('ink'), 'ink-2': token('ink-2'), 'ink-3': token('ink-3'),
      'accent': token('accent'), 'accent-ink': token('accent-ink'), 'accent-wash': token('accent-wash'),
      'ok': token('ok'), 'warn': token('warn'), 'bad': token('bad'), 'bad-wash': token('bad-wash'),
    },
    fontFamily: { sans: token('font'), mono: token('mono') },
    fontSize: { xs: ['11px', '15px'], s: ['12.5px', '17px'], m: ['14px', '20px'], l: ['18px', '24px'], xl: ['26px', '31px'] },
    fontWeight: { normal: '400', medium: '500' },
    borderRadius: { none: '0', DEFAULT: '2px' },
    boxShadow: {},
    screens: { tablet: '700px', desk: '1020px', wide: '1400px' },
  },
} satisfies Config
