import js from '@eslint/js';
import reactHooks from 'eslint-plugin-react-hooks';
import { defineConfig, globalIgnores } from 'eslint/config';
import globals from 'globals';
import tseslint from 'typescript-eslint';

export default defineConfig([
  globalIgnores(['**/dist/**', '**/node_modules/**', 'ui/src/api/schema.d.ts', 'data/**', '.cache/**']),
  js.configs.recommended,
  tseslint.configs.recommended,
  {
    rules: {
      '@typescript-eslint/no-unused-vars': ['error', { argsIgnorePattern: '^_', varsIgnorePattern: '^_' }],
      // `== null` stands for "null or undefined".
      eqeqeq: ['error', 'always', { null: 'ignore' }],
    },
  },
  {
    files: ['service/**/*.ts', 'simulator/**/*.ts', 'ui/e2e/**/*.ts'],
    languageOptions: { globals: globals.node },
  },
  { files: ['**/*.{mjs,js}'], languageOptions: { globals: { ...globals.node, ...globals.browser } } },
  {
    files: ['ui/src/**/*.{ts,tsx}', 'ui/test/**/*.{ts,tsx}'],
    extends: [reactHooks.configs.flat.recommended],
    languageOptions: { globals: globals.browser },
  },
]);
