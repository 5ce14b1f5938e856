import type { Config } from 'tailwindcss'

/** Colours are the CSS custom properties of assets/css/main.css, so that a theme is one attribute on <html>. */
export default {
  content: [],
  theme: {
    borderRadius: { none: '0', DEFAULT: '3px', full: '9999px' },
    boxShadow: {},
    extend: {
      colors: {
        ground: 'var(--ground)', raised: 'var(--raised)', hairline: 'var(--hairline)', edge: 'var(--edge)',
        ink: 'var(--ink)', soft: 'var(--soft)', lamp: 'var(--lamp)', 'lamp-dim': 'var(--lamp-dim)',
        'on-lamp': 'var(--on-lamp)', 'on-dim': 'var(--on-dim)', cold: 'var(--cold)', good: 'var(--good)', bad: 'var(--bad)',
      },
      fontFamily: {
        sans: ['"Atkinson Hyperlegible Next Variable"', 'system-ui', 'sans-serif'],
        mono: ['"Atkinson Hyperlegible Mono Variable"', 'ui-monospace', 'monospace'],
      },
      fontSize: { recipe: ['17px', '1.55'], figure: ['34px', '1.1'] },
    },
  },
} satisfies Config
