import js from '@eslint/js'
import prettier from 'eslint-config-prettier'
import vue from 'eslint-plugin-vue'
import ts from 'typescript-eslint'
import vueParser from 'vue-eslint-parser'

const chanceAndClock = [
  {
    selector: "CallExpression[callee.object.name='Date'][callee.property.name='now']",
    message: 'Ask the injected clock.',
  },
  { selector: "NewExpression[callee.name='Date'][arguments.length=0]", message: 'Ask the injected clock.' },
  {
    selector: "MemberExpression[object.name='Math'][property.name='random']",
    message: 'Ask the injected random source.',
  },
]

export default ts.config(
  { ignores: ['dist', 'node_modules', '.data', '.cache', 'coverage', 'shots'] },
  js.configs.recommended,
  ...vue.configs['flat/recommended'],
  {
    files: ['**/*.ts', '**/*.vue'],
    extends: [...ts.configs.strictTypeChecked],
    languageOptions: {
      parserOptions: {
        parser: ts.parser,
        project: ['./tsconfig.shared.json', './tsconfig.app.json', './tsconfig.node.json'],
        tsconfigRootDir: import.meta.dirname,
        extraFileExtensions: ['.vue'],
      },
    },
    rules: {
      'no-undef': 'off',
      'no-restricted-syntax': ['error', ...chanceAndClock],
      '@typescript-eslint/consistent-type-imports': 'error',
      '@typescript-eslint/consistent-type-assertions': [
        'error',
        { assertionStyle: 'as', objectLiteralTypeAssertions: 'never' },
      ],
      '@typescript-eslint/restrict-template-expressions': ['error', { allowNumber: true }],
      '@typescript-eslint/no-confusing-void-expression': ['error', { ignoreArrowShorthand: true }],
    },
  },
  { files: ['**/*.vue'], languageOptions: { parser: vueParser } },
  {
    files: ['**/*.mjs', '*.js'],
    languageOptions: {
      globals: {
        process: 'readonly',
        console: 'readonly',
        URL: 'readonly',
        setTimeout: 'readonly',
        fetch: 'readonly',
      },
    },
  },
  { files: ['src/shared/domain/clock.ts'], rules: { 'no-restricted-syntax': 'off' } },
  { files: ['src/**/*.vue'], rules: { 'vue/multi-word-component-names': 'off' } },
  prettier,
)
