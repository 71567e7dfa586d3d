import { fileURLToPath } from 'node:url'
import vue from '@vitejs/plugin-vue'
import { defineConfig } from 'vitest/config'

const postgres = './tests/harness/global-setup.ts'
const client = './tests/harness/client-setup.ts'

/**
 * The projects, in the order they run: each has its own turn, so that a test that measures time does not
 * share two cores with a build or a browser.
 */
const projects = [
  { name: 'structure', include: ['tests/*.test.ts', 'tests/{architecture,run}/**/*.test.ts'] },
  { name: 'unit', include: ['src', 'server', 'broker', 'simulators'].map((top) => `${top}/**/*.test.ts`) },
  { name: 'reference', include: ['tests/{reference,forecast}/**/*.test.ts'], testTimeout: 60_000 },
  { name: 'setup', include: ['tests/setup/**/*.test.ts'], testTimeout: 60_000 },
  { name: 'api', include: ['tests/api/**/*.test.ts'], globalSetup: [postgres], testTimeout: 20_000 },
  { name: 'broker', include: ['tests/broker/**/*.test.ts'], globalSetup: [postgres], testTimeout: 120_000 },
  { name: 'live', include: ['tests/live/**/*.test.ts'], globalSetup: [postgres], testTimeout: 30_000 },
  {
    name: 'browser',
    include: ['tests/e2e/**/*.test.ts'],
    globalSetup: [postgres, client],
    testTimeout: 120_000,
  },
]

/** These start servers and measure what they do: one file at a time. */
const alone = new Set(['broker', 'live', 'browser'])

export default defineConfig({
  plugins: [vue()],
  resolve: { alias: { '@': fileURLToPath(new URL('./src', import.meta.url)) } },
  test: {
    maxWorkers: 2,
    projects: projects.map(({ name, ...own }, order) => ({
      extends: true as const,
      test: {
        name,
        environment: 'node',
        restoreMocks: true,
        hookTimeout: 120_000,
        fileParallelism: !alone.has(name),
        sequence: { groupOrder: order },
        ...own,
      },
    })),
  },
})
