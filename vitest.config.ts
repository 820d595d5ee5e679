import { availableParallelism } from 'node:os';
import { defineConfig } from 'vitest/config';

export default defineConfig({
  test: {
    // One process for each core: the browser journeys, which mostly wait, run beside the rest.
    maxWorkers: availableParallelism(),
    projects: [
      {
        root: './service',
        test: {
          name: 'service',
          environment: 'node',
          include: ['test/**/*.test.ts', 'src/**/*.test.ts'],
          pool: 'forks',
          testTimeout: 120_000,
          hookTimeout: 120_000,
        },
      },
      {
        extends: './ui/vite.config.ts',
        root: './ui',
        test: {
          name: 'ui',
          environment: 'jsdom',
          include: ['test/**/*.test.{ts,tsx}', 'src/**/*.test.{ts,tsx}'],
          setupFiles: ['./test/setup.ts'],
          testTimeout: 60_000,
        },
      },
      {
        root: './simulator',
        test: { name: 'simulator', environment: 'node', include: ['src/**/*.test.ts'], testTimeout: 60_000 },
      },
      {
        root: './ui',
        test: {
          name: 'browser',
          environment: 'node',
          include: ['e2e/**/*.test.ts'],
          testTimeout: 300_000,
          hookTimeout: 120_000,
        },
      },
    ],
  },
});
