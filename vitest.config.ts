import { defineConfig } from "vitest/config";

export default defineConfig({
  test: {
    include: ["test/**/*.test.ts"],
    exclude: ["test/soak/**", "test/bench/**"],
    setupFiles: ["test/setup/quiet.ts"],
    testTimeout: 120_000,
    maxWorkers: 2,
  },
});
