import { defineConfig } from "vitest/config";

export default defineConfig({
  test: {
    include: ["test/bench/**/*.test.ts"],
    setupFiles: ["test/setup/quiet.ts"],
    testTimeout: 3_600_000,
    maxWorkers: 1,
  },
});
