import withNuxt from './.nuxt/eslint.config.mjs'

/** Who may import whom; see DEVELOPERS.md, "Boundaries". */
const never = (files, groups, why) => ({
  files,
  rules: { 'no-restricted-imports': ['error', { patterns: groups.map(group => ({ group: [group], message: why })) }] },
})

export default withNuxt(
  { ignores: ['.data/**', '.data-test/**', '.cache/**', '.output/**', 'test-results/**', 'workers/kernels/assembly/**'] },
  never(['workers/**/*.ts'], ['vue', 'pinia', '#app', '#imports', '**/components/**', '**/stores/**', '**/composables/**', '**/server/**', 'node:*'],
    'The imaging core knows no Vue, no Nuxt, no server and no Node.'),
  never(['shared/**/*.ts'], ['vue', 'pinia', '#app', '#imports', '**/workers/**', '**/components/**', '**/server/**', 'node:*'],
    'shared/ depends on nothing of the project.'),
  never(['server/**/*.ts'], ['**/workers/**', '**/components/**', '**/stores/**', '**/composables/**', '**/pages/**'],
    'The server knows shared/ and itself only.'),
  never(['pages/**/*.vue', 'components/**/*.vue'], ['**/server/**', 'comlink', '**/workers/*/**', '**/workers/*.worker*'],
    'Screens reach the core through composables/useCore.ts and the server through its API.'),
  {
    rules: {
      'vue/multi-word-component-names': 'off',
      'vue/max-attributes-per-line': 'off',
      'vue/singleline-html-element-content-newline': 'off',
      '@stylistic/max-statements-per-line': 'off',
      '@stylistic/quote-props': 'off',
      '@stylistic/member-delimiter-style': 'off',
      '@stylistic/operator-linebreak': 'off',
    },
  },
)
