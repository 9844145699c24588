import { fileURLToPath } from 'node:url';
import { defineConfig } from 'vitest/config';

const source = (path: string): string => fileURLToPath(new URL(`../${path}`, import.meta.url));

// Tests run on the sources, one copy of each module, whichever way a test reaches it.
export default defineConfig({
  root: source('test'),
  resolve: {
    alias: {
      '@stillwell/protocol': source('protocol/index.ts'),
      '@stillwell/runtime/filter': source('runtime/filter/index.ts'),
      '@stillwell/runtime/files': source('runtime/files.ts'),
      '@stillwell/runtime/mqtt': source('runtime/mqtt/connection.ts'),
      '@stillwell/runtime': source('runtime/index.ts'),
      '@stillwell/trainer': source('trainer/index.ts'),
    },
  },
  test: {
    include: ['**/*.test.ts'],
    testTimeout: 30_000,
    hookTimeout: 60_000,
    maxWorkers: 2,
  },
});
