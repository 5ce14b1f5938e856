/**
 * Cross-origin isolation gives the workers SharedArrayBuffer; the same headers are set for Vite's own
 * answers in development, or module workers are blocked there without a word.
 */
const isolation = {
  'X-Content-Type-Options': 'nosniff',
  'Referrer-Policy': 'same-origin',
  'Cross-Origin-Opener-Policy': 'same-origin',
  'Cross-Origin-Embedder-Policy': 'require-corp',
  'Cross-Origin-Resource-Policy': 'same-origin',
}

/**
 * For everything but pages, which get a policy with a nonce (server/plugins/2.policy.ts). It is also the policy that
 * workers run under: they may compile WebAssembly and fetch from here, and nothing else.
 */
const staticPolicy = 'default-src \'none\'; script-src \'self\' \'wasm-unsafe-eval\'; worker-src \'self\'; connect-src \'self\'; img-src \'self\' data:; style-src \'unsafe-inline\'; object-src \'none\'; base-uri \'none\'; frame-ancestors \'none\''

export default defineNuxtConfig({
  modules: ['@pinia/nuxt', '@nuxtjs/tailwindcss', 'nuxt-auth-utils', '@nuxt/eslint'],
  components: [{ path: '~/components', pathPrefix: false }],
  devtools: { enabled: false },
  app: {
    head: {
      htmlAttrs: { lang: 'en' },
      title: 'Lull',
      meta: [{ name: 'viewport', content: 'width=device-width, initial-scale=1' }, { name: 'color-scheme', content: 'dark light' }],
      link: [{ rel: 'icon', type: 'image/svg+xml', href: '/lull.svg' }],
    },
  },
  css: [
    '@fontsource-variable/atkinson-hyperlegible-next/index.css',
    '@fontsource-variable/atkinson-hyperlegible-mono/index.css',
  ],
  runtimeConfig: {
    session: { name: 'lull-session', password: '', maxAge: 60 * 60 * 24 * 14, sessionHeader: false, cookie: { sameSite: 'lax', secure: false } },
    databaseUrl: '',
    dataDir: '.data',
    smtpUrl: '',
    mailFrom: 'Lull <lull@localhost>',
    publicUrl: '',
  },
  srcDir: '.',
  serverDir: 'server',
  ignore: ['.data/**', '.data-test/**', '.cache/**', 'migrations/**', 'tests/**', 'scripts/**'],
  routeRules: {
    '/**': { headers: isolation },
    '/_nuxt/**': { headers: { 'Content-Security-Policy': staticPolicy } },
    '/api/**': { headers: { 'Content-Security-Policy': staticPolicy } },
    '/files/**': { headers: { 'Content-Security-Policy': staticPolicy } },
    '/s/**': { headers: { 'Referrer-Policy': 'no-referrer', 'Cache-Control': 'no-store', 'X-Robots-Tag': 'noindex' } },
  },
  compatibilityDate: '2025-07-15',
  vite: {
    server: { headers: isolation },
    worker: { format: 'es' },
    optimizeDeps: { include: ['comlink', 'fft.js', 'geotiff', 'upng-js', 'konva', 'vue-konva', '@uppy/core', '@uppy/tus', 'zod', 'hash-wasm'] },
  },
  // AssemblyScript only looks like TypeScript; scripts/build-kernels.mjs compiles it.
  typescript: { strict: true, tsConfig: { exclude: ['../workers/kernels/assembly/**'] } },
  telemetry: { enabled: false },
  auth: { loadStrategy: 'none' },
  eslint: { config: { stylistic: true } },
  tailwindcss: { cssPath: '~/assets/css/main.css', viewer: false },
})
